package fused

import (
	"fmt"
	"math"

	"lapgate/pipeline/raster"
)

// Planes are the images of a correction: corrected counts are
// (raw − dark − stray) / response, in DN. Nil means none was taken.
type Planes struct {
	Dark, Stray *raster.Plane // DN
	Response    *raster.Plane // share of the mean, above 0 but in bad pixels
	Bad         *raster.Mask  // pixels that are replaced by their neighbours
}

// Correction is a set of Planes made ready for the kernels. It never changes and may
// be used by many calls at once. It refers to the planes it was made of.
type Correction struct {
	format                raster.PixelFormat
	width, height         int
	dark, stray, response []float32
	badStart, badX        []int32 // columns of bad pixels by row
	badNear               []uint8 // which of a bad pixel's neighbours are good, see pass.h
	offset, gain          []int16 // nil = none, or the float path only
	factor                int     // counts are multiplied by it
	scale                 float64 // units of a corrected integer per DN
	integer               bool    // 16-bit integers hold counts and images
	bands                 pool
}

// NewCorrection makes a Correction for frames of a format and size. The error says
// which plane does not fit.
func NewCorrection(format raster.PixelFormat, width, height int, p Planes) (*Correction, error) {
	size := raster.Raw{Format: format, Width: width, Height: height, Stride: format.RowBytes(width)}
	if err := size.CheckDimensions(); err != nil {
		return nil, err
	}
	c := &Correction{format: format, width: width, height: height}
	for _, n := range []struct {
		name string
		from *raster.Plane
		to   *[]float32
	}{{"dark", p.Dark, &c.dark}, {"stray", p.Stray, &c.stray}, {"response", p.Response, &c.response}} {
		if n.from == nil {
			continue
		}
		if n.from.Width != width || n.from.Height != height {
			return nil, fmt.Errorf("%s: got %d × %d px, want %d × %d", n.name, n.from.Width, n.from.Height, width, height)
		}
		*n.to = whole(n.from)
	}
	if p.Bad != nil {
		if p.Bad.Width != width || p.Bad.Height != height {
			return nil, fmt.Errorf("bad pixels: got %d × %d px, want %d × %d", p.Bad.Width, p.Bad.Height, width, height)
		}
		c.listBad(p.Bad)
	}
	if err := c.checkNumbers(); err != nil {
		return nil, err
	}
	c.makeIntegers()
	return c, nil
}

// whole returns the pixels row by row without gaps.
func whole(p *raster.Plane) []float32 {
	if p.Stride == p.Width {
		return p.Pix[:p.Width*p.Height]
	}
	return p.Clone().Pix
}

func (c *Correction) listBad(m *raster.Mask) {
	start := make([]int32, c.height+1)
	for y := range c.height {
		for x, bad := range m.Row(y) {
			if bad {
				c.badX = append(c.badX, int32(x))
			}
		}
		start[y+1] = int32(len(c.badX))
	}
	if len(c.badX) > 0 {
		c.badStart = start
		c.listNear(m)
	}
}

func (c *Correction) listNear(m *raster.Mask) {
	c.badNear = make([]uint8, 0, len(c.badX))
	for y := range c.height {
		for _, x := range c.badX[c.badStart[y]:c.badStart[y+1]] {
			c.badNear = append(c.badNear, goodAround(m, int(x), y))
		}
	}
}

func goodAround(m *raster.Mask, x, y int) uint8 {
	var near, bit uint8 = 0, 1
	for v := y - 1; v <= y+1; v++ {
		for u := x - 1; u <= x+1; u++ {
			if u == x && v == y {
				continue
			}
			if u >= 0 && v >= 0 && u < m.Width && v < m.Height && !m.Row(v)[u] {
				near |= bit
			}
			bit <<= 1
		}
	}
	return near
}

func (c *Correction) isBad(i int) bool {
	if c.badStart == nil {
		return false
	}
	for _, x := range c.badX[c.badStart[i/c.width]:c.badStart[i/c.width+1]] {
		if int(x) == i%c.width {
			return true
		}
	}
	return false
}

// checkNumbers refuses what would make a good pixel no number.
func (c *Correction) checkNumbers() error {
	for name, pix := range map[string][]float32{"dark": c.dark, "stray": c.stray} {
		for i, v := range pix {
			if !(v > -1e6 && v < 1e6) {
				return fmt.Errorf("%s: got %g DN at pixel (%d, %d), want a number within ±1000000", name, v, i%c.width, i/c.width)
			}
		}
	}
	for i, v := range c.response {
		if !(v > 1e-3 && v < 1e3) && !c.isBad(i) {
			return fmt.Errorf("response: got %g at pixel (%d, %d), want 0.001 to 1000, or the pixel among the bad ones", v, i%c.width, i/c.width)
		}
	}
	return nil
}

// makeIntegers makes offset and gain, where 16 bits hold them: a count times factor less
// offset, times gain / 2^15, is the corrected count times scale.
func (c *Correction) makeIntegers() {
	bits := c.format.SignificantBits()
	if bits > 12 {
		return
	}
	most := c.mostGain()
	switch bits {
	case 8:
		c.factor = 32
	case 10:
		c.factor = 16
	default:
		c.factor = 4
	}
	c.scale = float64(c.factor)
	shift := 0 // bits of gain before the point, less one
	if c.response != nil {
		// A count fills 15 bits; a gain of up to 2 leaves half of its scale, up to 4 a quarter.
		c.factor = 128 >> (bits - 8)
		for shift = 1; float64(int(1)<<shift) <= most && shift < 5; shift++ {
		}
		if bits == 8 {
			shift = max(shift, 2) // room for signals of any height: see CLAMP in kernels_int.h
		}
		c.scale = float64(c.factor) / float64(int(1)<<shift)
		if float64(int(1)<<shift) <= most {
			return
		}
		c.makeGain(shift)
	}
	c.integer = c.makeOffset()
}

// mostGain is the largest 1/response of a good pixel.
func (c *Correction) mostGain() float64 {
	most := 0.
	for i, v := range c.response {
		if g := 1 / float64(v); g > most && !c.isBad(i) {
			most = g
		}
	}
	return most
}

func (c *Correction) makeGain(shift int) {
	c.gain = make([]int16, len(c.response))
	for i, v := range c.response {
		c.gain[i] = int16(min(max(math.Round(32768/float64(v)/float64(int(1)<<shift)), 0), 32767)) // NaN: a bad pixel, any value
	}
}

// makeOffset reports whether every offset fits.
func (c *Correction) makeOffset() bool {
	if c.dark == nil && c.stray == nil {
		return true
	}
	c.offset = make([]int16, c.width*c.height)
	top := float64(c.format.MaxCount() * c.factor)
	for i := range c.offset {
		v := 0.
		if c.dark != nil {
			v += float64(c.dark[i])
		}
		if c.stray != nil {
			v += float64(c.stray[i])
		}
		v = math.Round(v * float64(c.factor))
		if (v > 32767 || v < top-32767) && !c.isBad(i) {
			return false
		}
		c.offset[i] = int16(min(max(v, -32768), 32767))
	}
	return true
}
