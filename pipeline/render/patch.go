package render

import (
	"math"

	"lapgate/pipeline/raster"
)

// patch is a small image that lies with its first pixel at (x0, y0) of the frame; it
// may stand out over the frame's border.
type patch struct {
	x0, y0, w, h int
	pix          []float32
}

// newPatch returns a zero patch that holds a circle about (x, y) and a margin.
func newPatch(x, y, radius, margin float64) *patch {
	reach := radius + margin + 1
	p := &patch{x0: int(math.Floor(x - reach)), y0: int(math.Floor(y - reach))}
	p.w = int(math.Ceil(x+reach)) - p.x0 + 1
	p.h = int(math.Ceil(y+reach)) - p.y0 + 1
	p.pix = make([]float32, p.w*p.h)
	return p
}

func (p *patch) row(y int) []float32 { return p.pix[y*p.w : (y+1)*p.w] }

// fineness is how many points a side each pixel has while a sharp outline is blurred;
// blurring whole pixels would pull the centroid of small discs by some hundredths.
const fineness = 3

// drawnFine fills the patch with what draw draws into a patch of pixels fineness times
// smaller, seen through a Gaussian of sigma px.
func (p *patch) drawnFine(sigma float64, draw func(fine *patch)) {
	fine := &patch{x0: p.x0 * fineness, y0: p.y0 * fineness, w: p.w * fineness, h: p.h * fineness}
	fine.pix = make([]float32, fine.w*fine.h)
	draw(fine)
	fine.blur(sigma * fineness)
	for y := range fine.h {
		row, out := fine.row(y), p.row(y/fineness)
		for x, v := range row {
			out[x/fineness] += v * (1.0 / (fineness * fineness))
		}
	}
}

// fineAt returns the place in fine pixels of a place in pixels: both count from the
// middle of their first one.
func fineAt(v float64) float64 { return (v+0.5)*fineness - 0.5 }

// blurReach is how many sigmas a Gaussian is followed.
const blurReach = 4

// blur convolves the patch with a Gaussian of sigma px. What reaches over the patch's
// border is lost: give it a margin of blurReach·sigma.
func (p *patch) blur(sigma float64) {
	if sigma <= 0 {
		return
	}
	kernel := gaussianKernel(sigma)
	line := make([]float32, max(p.w, p.h))
	for y := range p.h {
		convolve(line[:p.w], p.pix[y*p.w:], 1, kernel)
	}
	for x := range p.w {
		convolve(line[:p.h], p.pix[x:], p.w, kernel)
	}
}

// gaussianKernel returns half a kernel, from its middle outwards, whose whole sums to 1.
func gaussianKernel(sigma float64) []float32 {
	n := int(math.Ceil(blurReach*sigma)) + 1
	half, sum := make([]float64, n), 0.0
	for i := range half {
		half[i] = math.Exp(-float64(i*i) / (2 * sigma * sigma))
		sum += half[i]
		if i > 0 {
			sum += half[i]
		}
	}
	out := make([]float32, n)
	for i := range out {
		out[i] = float32(half[i] / sum)
	}
	return out
}

// convolve replaces every step-th value of data, len(line) of them, by its convolution
// with the symmetric kernel; line is scratch space.
func convolve(line, data []float32, step int, kernel []float32) {
	empty := true
	for i := range line {
		line[i] = data[i*step]
		empty = empty && line[i] == 0
	}
	if empty {
		return
	}
	n := len(line)
	for i := range line {
		sum := kernel[0] * line[i]
		for k := 1; k < len(kernel); k++ {
			if i-k >= 0 {
				sum += kernel[k] * line[i-k]
			}
			if i+k < n {
				sum += kernel[k] * line[i+k]
			}
		}
		data[i*step] = sum
	}
}

// inFrame returns the rows and columns of the patch that lie in a frame.
func (p *patch) inFrame(width, height int) (y0, y1, x0, x1 int) {
	return max(0, -p.y0), min(p.h, height-p.y0), max(0, -p.x0), min(p.w, width-p.x0)
}

func (p *patch) addTo(plane *raster.Plane) {
	y0, y1, x0, x1 := p.inFrame(plane.Width, plane.Height)
	for y := y0; y < y1; y++ {
		row, out := p.row(y), plane.Row(p.y0+y)
		for x := x0; x < x1; x++ {
			out[p.x0+x] += row[x]
		}
	}
}

// extreme returns the sum over the frame, and the value of largest size with its pixel
// in the frame.
func (p *patch) extreme(width, height int) (sum, peak float64, x, y int) {
	y0, y1, x0, x1 := p.inFrame(width, height)
	for py := y0; py < y1; py++ {
		row := p.row(py)
		for px := x0; px < x1; px++ {
			v := float64(row[px])
			sum += v
			if math.Abs(v) > math.Abs(peak) {
				peak, x, y = v, p.x0+px, p.y0+py
			}
		}
	}
	return sum, peak, x, y
}
