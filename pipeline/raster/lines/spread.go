package lines

// #cgo noescape ln_over
// #cgo nocallback ln_over
// #include "lines.h"
import "C"

import "math"

const (
	rows   = C.LN_ROWS
	bins   = C.LN_BINS
	levels = C.LN_LEVELS
)

// levelRows are the lengths of line, in positions, whose scatter is measured.
var levelRows = [levels]int{rows, rows / 2, 16}

// scatter is the variance of line sums over that of white noise, for lines as long as
// levelRows.
type scatter [levels]float64

func (s scatter) most(o scatter) scatter {
	for level, v := range o {
		s[level] = max(s[level], v)
	}
	return s
}

// over is that of lines of some number of positions.
func (s scatter) over(positions float64) float64 {
	if s[0] <= 1 && s[1] <= 1 && s[2] <= 1 { // as most are
		return max(s[0], s[1])
	}
	return float64(C.ln_over(s.c(), C.double(positions)))
}

func (s *scatter) c() *C.double { return (*C.double)(&s[0]) }

// spread is the scatter of the line sums by place and slope.
type spread struct{ axes [2]axisSpread }

// axisSpread is that of the strips of rows (axis 0) or columns (axis 1).
type axisSpread struct {
	length, tiles int
	first         []int     // where the strips start
	values        []float32 // [strip][flipped][tile][level][bin]
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

// settle takes what a slope's sums scatter less than 15 % beyond those of all slopes of
// their tile, which is known better, for chance; and for white noise what lies within 2 % of
// it. All pixels of a picture whose noise is misjudged scatter alike.
func (a *axisSpread) settle() {
	for at := 0; at < len(a.values); at += a.size() {
		for tile := range a.tiles {
			for level := range levels {
				up := a.values[at+(tile*levels+level)*bins:][:bins]
				down := a.values[at+((a.tiles+tile)*levels+level)*bins:][:bins]
				calm(up, down)
			}
		}
	}
}

func calm(up, down []float32) {
	var all [2 * bins]float32
	copy(all[copy(all[:], up):], down)
	common := float64(median(all[:]))
	if math.Abs(common-1) < 0.02 {
		common = 1
	}
	for _, v := range [][]float32{up, down} {
		for i := range v {
			if float64(v[i]) < 1.15*common {
				v[i] = float32(common)
			}
		}
	}
}

func (a *axisSpread) size() int { return 2 * a.tiles * levels * bins }

func (a *axisSpread) of(strip int) []float32 { return a.values[strip*a.size() : (strip+1)*a.size()] }

// at returns the scatter about a line that has the cross position c at position m along the
// axis and the slope given, |slope| <= 1: the largest of the neighbouring slopes.
func (a *axisSpread) at(m, c, slope float64) scatter {
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
	wide := (a.length + rows - 1 + a.tiles - 1) / a.tiles
	tile := min(max((int(x)+rows-1)/wide, 0), a.tiles-1)
	var out scatter
	for level := range out {
		v := a.of(strip)[((flipped*a.tiles+tile)*levels+level)*bins:][:bins]
		bin := min(int(t)/C.LN_BIN, bins-1)
		out[level] = float64(max(v[max(bin-1, 0)], v[bin], v[min(bin+1, bins-1)]))
	}
	return out
}

// along is the mean scatter along a stretch.
func (s *spread) along(k stretch) scatter {
	slope := k.slope()
	n := (k.b - k.a + rows) / rows
	var out scatter
	for i := range n {
		m := float64(k.a) + (float64(i)+0.5)*float64(k.b-k.a)/float64(n)
		one := s.near(k.axis, m, k.ca+slope*(m-float64(k.a)), slope)
		for level, v := range one {
			out[level] += v / float64(n)
		}
	}
	return out
}

// near is the scatter about a point of a line by its own axis, or the other one where it is
// steeper than that one's strips have it.
func (s *spread) near(axis int, m, c, slope float64) scatter {
	if math.Abs(slope) > 1 {
		return s.axes[1-axis].at(c, m, 1/slope)
	}
	return s.axes[axis].at(m, c, slope)
}
