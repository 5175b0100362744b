package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// bend is how far beside a path the line's own course lies, at places along it.
type bend []beside

type beside struct{ s, off float64 } // px along, px beside

// at is linear between the places and constant beyond.
func (b bend) at(s float64) float64 {
	for i := range b {
		if s > b[i].s {
			continue
		}
		if i == 0 {
			return b[0].off
		}
		t := (s - b[i-1].s) / (b[i].s - b[i-1].s)
		return b[i-1].off + t*(b[i].off-b[i-1].off)
	}
	if len(b) == 0 {
		return 0
	}
	return b[len(b)-1].off
}

// most is the largest distance from the path.
func (b bend) most() float64 {
	most := 0.
	for _, p := range b {
		most = max(most, math.Abs(p.off))
	}
	return most
}

const (
	windowSigmas = 8.  // that a window of a line has, so that its place is known to a fraction of a pixel
	leastWindow  = 10. // px along
	mostBend     = 2.5 // px that the course may lie beside the path
	endStep      = 1.5 // px from the last window but one to the last
	leastBend    = 0.3 // px somewhere; below it the path is left as it is
)

// bend finds the course of a line of some width in windows along it. A line with less
// evidence than two windows need has none.
func (m *sampled) bend(rows []row, length, sigmas, width float64) bend {
	n := int(min(math.Pow(sigmas/windowSigmas, 2), length/leastWindow))
	if n < 2 {
		return nil
	}
	var out bend
	for i := range n {
		part := rows[i*len(rows)/n : (i+1)*len(rows)/n]
		if len(part) < 4 {
			continue
		}
		out = append(out, beside{(part[0].s + part[len(part)-1].s) / 2, summit(m.across(part), width)})
	}
	out = out.calm()
	if !slices.ContainsFunc(out, func(p beside) bool { return math.Abs(p.off) >= leastBend }) {
		return nil
	}
	return out
}

// calm takes the median of three neighbours, and lets the ends lie little off theirs: a
// spot in one window moves nothing.
func (b bend) calm() bend {
	out := slices.Clone(b)
	if n := len(b); n > 2 {
		out[0].off = max(min(b[0].off, b[1].off+endStep), b[1].off-endStep)
		out[n-1].off = max(min(b[n-1].off, b[n-2].off+endStep), b[n-2].off-endStep)
	}
	for i := 1; i+1 < len(b); i++ {
		v := []float64{b[i-1].off, b[i].off, b[i+1].off}
		slices.Sort(v)
		out[i].off = v[1]
	}
	return out
}

// summit is where the profile, in a mean as wide as the line, is highest near its middle.
func summit(v []float64, width float64) float64 {
	half := max(int(width/2/profileStep+0.5), 1)
	broad := func(k int) float64 {
		sum, n := 0., 0.
		for d := -half; d <= half; d++ {
			if k+d >= 0 && k+d < len(v) {
				share := 1 - math.Abs(float64(d))/float64(half+1)
				sum, n = sum+share*v[k+d], n+share
			}
		}
		return sum / n
	}
	middle, most := len(v)/2, int(mostBend/profileStep)
	best, top := middle, broad(middle)
	for k := middle - most; k <= middle+most; k++ {
		if x := broad(k); x > top {
			best, top = k, x
		}
	}
	off := 0.
	if a, c := broad(best-1), broad(best+1); a+c < 2*top { // a parabola through three
		off = (a - c) / (2 * (a + c - 2*top))
		off = max(-0.5, min(off, 0.5))
	}
	return (float64(best-middle) + off) * profileStep
}

// bent moves a path onto the line's course, with a corner at every place of the bend.
func (b bend) bent(path []raster.Point) []raster.Point {
	if len(b) == 0 {
		return path
	}
	var out []raster.Point
	s := 0.
	for i := 1; i < len(path); i++ {
		p, q := path[i-1], path[i]
		d := distance(p, q)
		if d == 0 {
			continue
		}
		nx, ny := normal(p, q)
		put := func(t float64) {
			off := b.at(s + t*d)
			out = append(out, raster.Point{X: p.X + t*(q.X-p.X) + off*nx, Y: p.Y + t*(q.Y-p.Y) + off*ny})
		}
		if len(out) == 0 {
			put(0)
		}
		for _, at := range b {
			if t := (at.s - s) / d; t > 0.02 && t < 0.98 {
				put(t)
			}
		}
		put(1)
		s += d
	}
	return out
}

// normal is the direction across a straight part in which rows count up.
func normal(p, q raster.Point) (x, y float64) {
	d := distance(p, q)
	x, y = -(q.Y-p.Y)/d, (q.X-p.X)/d
	if along := math.Abs(q.X-p.X) > math.Abs(q.Y-p.Y); along && y < 0 || !along && x < 0 {
		x, y = -x, -y
	}
	return x, y
}
