package raster

import "fmt"

// Raw is a frame as the camera packed it. Data is never altered.
type Raw struct {
	Format        PixelFormat
	Width, Height int
	Stride        int // bytes between the starts of two rows, >= Format.RowBytes(Width)
	Data          []byte
}

// MaxSide is the longest side, in pixels, that a frame may have.
const MaxSide = 65535

// NewRaw returns a zero Raw with the smallest stride.
func NewRaw(f PixelFormat, width, height int) Raw {
	stride := f.RowBytes(width)
	return Raw{Format: f, Width: width, Height: height, Stride: stride, Data: make([]byte, stride*height)}
}

// Size returns the bytes that the frame's dimensions call for. It cannot overflow
// once CheckDimensions has passed.
func (r Raw) Size() int { return r.Stride * r.Height }

// CheckDimensions refuses unknown formats and impossible sizes; the error names the
// field, what was found and what is wanted.
func (r Raw) CheckDimensions() error {
	switch {
	case !r.Format.Known():
		return fmt.Errorf("pixel_format: got %s, want one of %v", r.Format, PixelFormats())
	case r.Width < 1 || r.Width > MaxSide:
		return fmt.Errorf("width: got %d, want 1 to %d", r.Width, MaxSide)
	case r.Height < 1 || r.Height > MaxSide:
		return fmt.Errorf("height: got %d, want 1 to %d", r.Height, MaxSide)
	case r.Stride < r.Format.RowBytes(r.Width):
		return fmt.Errorf("stride: got %d bytes, want at least %d for %d pixels of %s",
			r.Stride, r.Format.RowBytes(r.Width), r.Width, r.Format)
	case r.Stride > 8*MaxSide:
		return fmt.Errorf("stride: got %d bytes, want at most %d", r.Stride, 8*MaxSide)
	}
	return nil
}

// Check is CheckDimensions and a check that Data has exactly the size they call for.
func (r Raw) Check() error {
	if err := r.CheckDimensions(); err != nil {
		return err
	}
	if len(r.Data) != r.Size() {
		return fmt.Errorf("data: got %d bytes, want %d (stride %d × height %d)", len(r.Data), r.Size(), r.Stride, r.Height)
	}
	return nil
}
