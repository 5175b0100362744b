package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// Two pieces are one line when their ends face each other within these.
const (
	joinAngle  = 12 * math.Pi / 180 // between the two, and the line from end to end
	joinBeside = 3                  // px that the ends may lie beside each other
)

// join makes one course of those whose ends face each other across a gap, the nearest first.
func (f *finder) join(all []course) []course {
	for {
		bi, bj, best := -1, -1, math.Inf(1)
		var joined course
		for i := range all {
			for j := range i {
				if c, gap, ok := f.joint(all[i], all[j]); ok && gap < best {
					bi, bj, best, joined = i, j, gap, c
				}
			}
		}
		if bi < 0 {
			return all
		}
		all[bj] = joined
		all = slices.Delete(all, bi, bi+1)
	}
}

// joint tries the four ways to put two courses end to end.
func (f *finder) joint(a, b course) (c course, gap float64, ok bool) {
	gap = math.Inf(1)
	if a.sign != b.sign || !f.mayTouch(a, b) {
		return c, gap, false
	}
	for _, p := range []course{a, a.reversed()} {
		for _, q := range []course{b, b.reversed()} {
			if g, faces := f.faces(p, q); faces && g < gap {
				gap, ok = g, true
				c = course{points: slices.Concat(p.points, q.points), pieces: slices.Concat(p.pieces, q.pieces), sign: p.sign, ridge: p.ridge && q.ridge}
			}
		}
	}
	return c, gap, ok
}

// mayTouch is false where no ends are near enough.
func (f *finder) mayTouch(a, b course) bool {
	reach := f.s.JoinGap + 8
	for _, p := range []raster.Point{a.points[0], a.points[len(a.points)-1]} {
		for _, q := range []raster.Point{b.points[0], b.points[len(b.points)-1]} {
			if distance(p, q) <= reach {
				return true
			}
		}
	}
	return false
}

// faces reports whether the last end of a leads over to the first of b, and how far apart
// they are; a little overlap is a gap of 0.
func (f *finder) faces(a, b course) (gap float64, ok bool) {
	p, q := a.points[len(a.points)-1], b.points[0]
	angleA, angleB := direction(a.points[len(a.points)-2], p), direction(q, b.points[1])
	if math.Abs(math.Remainder(angleA-angleB, 2*math.Pi)) > joinAngle {
		return 0, false
	}
	sin, cos := math.Sincos(angleA)
	along := (q.X-p.X)*cos + (q.Y-p.Y)*sin
	beside := math.Abs((q.Y-p.Y)*cos - (q.X-p.X)*sin)
	if along < -8 || along > f.s.JoinGap || beside > joinBeside+math.Tan(joinAngle)*max(along, 0)/2 {
		return 0, false
	}
	return max(along, 0), true
}

func direction(p, q raster.Point) float64 { return math.Atan2(q.Y-p.Y, q.X-p.X) }
