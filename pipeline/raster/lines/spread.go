package lines

// #include "lines.h"
import "C"

import "math"

const (
	rows = C.LN_ROWS
	bins = C.LN_BINS
)

// spread is the variance of the line sums over that of white noise, by place and slope.
type spread struct{ axes [2]axisSpread }

// axisSpread is that of the strips of rows (axis 0) or columns (axis 1).
type axisSpread struct {
	length, tiles int
	first         []int     // where the strips start
	values        []float32 // [strip][flipped][tile][bin]
}

func newSpread(width, height int) *spread {
	s := &spread{}
	s.axes[0] = newAxisSpread(width, height)
	s.axes[1] = newAxisSpread(height, width)
	return s
}

// newAxisSpread is for strips of the given length; across is how far they reach together.
// They lie evenly, the last one ends with the picture.
func newAxisSpread(length, across int) axisSpread {
	a := axisSpread{length: length, tiles: int(C.ln_tiles(C.int32_t(length)))}
	n := (across + rows - 1) / rows
	for i := range n {
		at := 0
		if n > 1 {
			at = i * (across - rows) / (n - 1)
		}
		a.first = append(a.first, at)
	}
	a.values = make([]float32, n*a.size())
	return a
}

func (a *axisSpread) size() int { return 2 * a.tiles * bins }

func (a *axisSpread) of(strip int) []float32 { return a.values[strip*a.size() : (strip+1)*a.size()] }

// at returns the spread about a line that has the cross position c at position m along the
// axis and the slope given, |slope| <= 1: the largest of the neighbouring slopes.
func (a *axisSpread) at(m, c, slope float64) float64 {
	strip := 0
	for strip+1 < len(a.first) && math.Abs(float64(a.first[strip+1])+rows/2-m) < math.Abs(float64(a.first[strip])+rows/2-m) {
		strip++
	}
	flipped, t := 0, slope*(rows-1)
	x := c - slope*(m-float64(a.first[strip]))
	if slope < 0 {
		flipped, t = 1, -t
		x = c + slope*(float64(a.first[strip]+rows-1)-m)
	}
	all := a.length + rows - 1
	wide := (all + a.tiles - 1) / a.tiles
	tile := min(max((int(x)+rows-1)/wide, 0), a.tiles-1)
	v := a.of(strip)[(flipped*a.tiles+tile)*bins:][:bins]
	bin := min(int(t)/C.LN_BIN, bins-1)
	return float64(max(v[max(bin-1, 0)], v[bin], v[min(bin+1, bins-1)]))
}

// over returns the variance of the sum along a stretch over that of white noise. What a
// strip's sums scatter beyond white noise is taken to go on along the line, as lay does,
// so that it grows with the length.
func (s *spread) over(k stretch) float64 {
	a := &s.axes[k.axis]
	slope := k.slope()
	n := (k.b - k.a + rows) / rows
	sum := 0.
	for i := range n {
		m := float64(k.a) + (float64(i)+0.5)*float64(k.b-k.a)/float64(n)
		sum += a.at(m, k.ca+slope*(m-float64(k.a)), slope)
	}
	v := sum / float64(n)
	if v <= 1 {
		return v
	}
	return 1 + (v-1)*float64(k.b-k.a+1)/rows
}
