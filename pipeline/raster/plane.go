package raster

import "fmt"

// Plane is a float32 image. Pixel (x, y) is Pix[y*Stride+x]. Once written by its
// maker a Plane is not changed again, so it may be shared between goroutines.
type Plane struct {
	Pix           []float32
	Width, Height int
	Stride        int // pixels between the starts of two rows, >= Width
}

// NewPlane returns a zero Plane of width × height pixels with Stride == width.
// It panics when a side is not positive: that is the programmer's error.
func NewPlane(width, height int) *Plane {
	if width <= 0 || height <= 0 {
		panic(fmt.Sprintf("raster: plane of %d × %d pixels", width, height))
	}
	return &Plane{Pix: make([]float32, width*height), Width: width, Height: height, Stride: width}
}

// At returns the value at (x, y).
func (p *Plane) At(x, y int) float32 { return p.Pix[y*p.Stride+x] }

// Set writes the value at (x, y).
func (p *Plane) Set(x, y int, v float32) { p.Pix[y*p.Stride+x] = v }

// Row returns the pixels of row y.
func (p *Plane) Row(y int) []float32 { return p.Pix[y*p.Stride : y*p.Stride+p.Width] }

// Clone returns a copy with Stride == Width.
func (p *Plane) Clone() *Plane {
	q := NewPlane(p.Width, p.Height)
	for y := range p.Height {
		copy(q.Row(y), p.Row(y))
	}
	return q
}

// SameSize reports whether p and q have equal width and height.
func (p *Plane) SameSize(q *Plane) bool { return p.Width == q.Width && p.Height == q.Height }
