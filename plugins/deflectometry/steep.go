package deflectometry

import (
	"math"

	"lapgate/pipeline/raster"
)

// field is the slopes of a view in mrad, each the mean of 3 × 3 px in use, so that a peak is
// not that of the noise; 0 where a pixel is not in use.
type field struct {
	slopes [][]float32 // along x, and along y where both directions were shown
	total  []float32   // their length
	width  int
}

func newField(slopes []*raster.Plane, use []bool) field {
	width := slopes[0].Width
	out := field{total: make([]float32, len(use)), width: width}
	for _, s := range slopes {
		smooth := means(s.Pix, use, width)
		for i, v := range smooth {
			out.total[i] = float32(math.Hypot(float64(out.total[i]), float64(v)))
		}
		out.slopes = append(out.slopes, smooth)
	}
	return out
}

// means are over the pixels in use among the 3 × 3 around each.
func means(values []float32, use []bool, width int) []float32 {
	out, height := make([]float32, len(values)), len(values)/width
	inBands(height, func(y0, y1 int) {
		for i := y0 * width; i < y1*width; i++ {
			if use[i] {
				out[i] = meanAround(values, use, width, height, i%width, i/width)
			}
		}
	})
	return out
}

func meanAround(values []float32, use []bool, width, height, x0, y0 int) float32 {
	sum, n := 0.0, 0.0
	for y := max(y0-1, 0); y <= min(y0+1, height-1); y++ {
		for x := max(x0-1, 0); x <= min(x0+1, width-1); x++ {
			if k := y*width + x; use[k] {
				sum, n = sum+float64(values[k]), n+1
			}
		}
	}
	return float32(sum / n)
}

func (f field) height() int { return len(f.total) / f.width }

// axis is a direction in which slopes are followed pixel by pixel.
type axis struct {
	slope        []float32
	lines        int // how many lines there are across
	length       int // pixels of one
	along, apart int // steps between the pixels of a line, and between lines
}

// axes returns the directions whose slopes are known.
func (f field) axes() []axis {
	all := []axis{{lines: f.height(), length: f.width, along: 1, apart: f.width}, {lines: f.width, length: f.height(), along: f.width, apart: 1}}
	for i := range f.slopes {
		all[i].slope = f.slopes[i]
	}
	return all[:len(f.slopes)]
}

func (a axis) at(line, k int) int { return line*a.apart + k*a.along }

func (a axis) slopeAt(line, k int) float64 { return float64(a.slope[a.at(line, k)]) }

// pieces returns the connected places of at least least px that are steeper than low, and
// for every pixel the number of its piece, −1 for none.
func (f field) pieces(low float64, least int) (pieces [][]raster.Span, of []int32) {
	mask := raster.NewMask(f.width, f.height())
	of = make([]int32, len(f.total))
	for i, v := range f.total {
		mask.Bits[i], of[i] = float64(v) > low, -1
	}
	for _, spans := range raster.Components(mask) {
		if raster.SpanArea(spans) < least {
			continue
		}
		for _, s := range spans {
			for x := s.X0; x < s.X1; x++ {
				of[s.Y*f.width+x] = int32(len(pieces))
			}
		}
		pieces = append(pieces, spans)
	}
	return pieces, of
}

// facing is what lies between two pieces along an axis, over all lines on which one comes
// after the other.
type facing struct {
	lines    float64
	opposite float64    // lines on which the slope changes its sign in between
	gap      float64    // px
	narrower float64    // px, of the two pieces' own lengths along the line
	bend     [3]float64 // how far the slope is from the straight line, at ¼, ½ and ¾ of the gap
}

// joined returns a number for each piece, the same for those that belong to one place: a
// dent shows its slope down and its slope up, a wave many of both, and between those the
// slope runs straight through zero. Beside a dent it dies away instead.
func (f field) joined(n int, of []int32, low float64) []int {
	group := make([]int, n)
	for i := range group {
		group[i] = i
	}
	for _, a := range f.axes() {
		found, lines := a.facings(of, n)
		for pair, between := range found {
			if between.one(low, min(lines[pair[0]], lines[pair[1]])) {
				merge(group, group[pair[0]], group[pair[1]])
			}
		}
	}
	return group
}

func merge(group []int, a, b int) {
	for i := range group {
		if group[i] == max(a, b) {
			group[i] = min(a, b)
		}
	}
}

// How two lobes of one place are told from two places.
const (
	facingShare   = 0.5  // of the lines of the smaller piece on which they face each other
	oppositeShare = 0.8  // of those lines on which the sign changes
	longestGap    = 4    // times the narrower piece
	straightShare = 0.25 // of the low threshold: how far from a straight line the slope may be
)

func (f *facing) one(low, lines float64) bool {
	if f.lines < facingShare*lines || f.opposite < oppositeShare*f.lines || f.gap > longestGap*f.narrower {
		return false
	}
	for _, b := range f.bend {
		if b/f.lines > straightShare*low || b/f.lines < -straightShare*low {
			return false
		}
	}
	return true
}

// stretch is an unbroken row of pixels of one piece on a line.
type stretch struct {
	piece  int32
	k0, k1 int
}

func (a axis) runs(line int, of []int32) []stretch {
	var out []stretch
	for k := range a.length {
		piece := of[a.at(line, k)]
		switch last := len(out) - 1; {
		case piece < 0:
		case last >= 0 && out[last].piece == piece && out[last].k1 == k:
			out[last].k1++
		default:
			out = append(out, stretch{piece, k, k + 1})
		}
	}
	return out
}

// facings looks at what lies between neighbouring pieces, and counts each piece's lines.
func (a axis) facings(of []int32, n int) (map[[2]int32]*facing, []float64) {
	found, lines, last := map[[2]int32]*facing{}, make([]float64, n), make([]int, n)
	for line := range a.lines {
		runs := a.runs(line, of)
		for i, r := range runs {
			if last[r.piece] != line+1 {
				last[r.piece] = line + 1
				lines[r.piece]++
			}
			if i == 0 || runs[i-1].piece == r.piece {
				continue
			}
			pair := [2]int32{min(runs[i-1].piece, r.piece), max(runs[i-1].piece, r.piece)}
			if found[pair] == nil {
				found[pair] = &facing{}
			}
			found[pair].add(a, line, runs[i-1], r)
		}
	}
	return found, lines
}

func (f *facing) add(a axis, line int, before, after stretch) {
	from, to := before.k1-1, after.k0
	start, end := a.slopeAt(line, from), a.slopeAt(line, to)
	f.lines++
	f.gap += float64(to - from - 1)
	f.narrower += float64(min(before.k1-before.k0, after.k1-after.k0))
	if (start > 0) != (end > 0) {
		f.opposite++
	}
	rising := 1.0
	if end < start {
		rising = -1
	}
	for i := range f.bend {
		t := float64(i+1) / 4
		k := from + int(t*float64(to-from)+0.5)
		exact := float64(k-from) / float64(to-from)
		f.bend[i] += rising * (a.slopeAt(line, k) - start - exact*(end-start))
	}
}
