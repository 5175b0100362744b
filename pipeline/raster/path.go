package raster

import (
	"math"
	"slices"
)

// maxPathPoints is how many points a path has at most.
const maxPathPoints = 64

// profileBins and profileStep are the cross profile of a long blob: bins across the
// path, and their width in px.
const (
	profileBins = 81
	profileStep = 0.5
)

// line is a long blob in coordinates along (t) and across (s) its long axis.
type line struct {
	w              *window
	x, y, cos, sin float64
	bin            float64   // length of a bin along t, px
	t0             float64   // where the first bin starts
	flux, cross    []float64 // of each bin: sum of the signal, and its mean s (before settle: sum of signal·s)
}

// follow measures a long blob along its own course. The course is the flux-weighted
// mean position across the long axis in bins along it, so it may bend but not turn
// back. The ends lie where the flux per bin falls to half of its median; the width is
// the full width at half height of the mean profile across the course. It returns
// false when there is no such profile.
func (w *window) follow(s Shape) (length, width float64, path []Point, ok bool) {
	l := newLine(w, s)
	a, b, ok := l.ends()
	if !ok {
		return 0, 0, nil, false
	}
	path = l.path(a, b)
	for i := 1; i < len(path); i++ {
		length += math.Hypot(path[i].X-path[i-1].X, path[i].Y-path[i-1].Y)
	}
	width, ok = l.width(a, b)
	return length, width, path, ok
}

func newLine(w *window, s Shape) *line {
	sin, cos := math.Sincos(s.Angle * math.Pi / 180)
	l := &line{w: w, x: s.X, y: s.Y, cos: cos, sin: sin, t0: math.Inf(1)}
	t1 := math.Inf(-1)
	l.each(func(t, _, _ float64) { l.t0, t1 = min(l.t0, t), max(t1, t) })
	l.bin = max(4, (t1-l.t0)/maxPathPoints)
	n := int((t1-l.t0)/l.bin) + 1
	l.flux, l.cross = make([]float64, n), make([]float64, n)
	l.each(func(t, s, v float64) {
		k := int((t - l.t0) / l.bin)
		l.flux[k] += v
		l.cross[k] += v * s
	})
	return l
}

// settle turns the sums across into means; a bin with less flux than least, as in a
// gap, takes the place of the bin before it. The course is smoothed with (1 2 1)/4.
func (l *line) settle(least float64) {
	last := 0.
	for k, f := range l.flux {
		if f >= least {
			last = l.cross[k] / f
		}
		l.cross[k] = last
	}
	rough := slices.Clone(l.cross)
	for k := 1; k+1 < len(rough); k++ {
		l.cross[k] = (rough[k-1] + 2*rough[k] + rough[k+1]) / 4
	}
}

// each calls f with place along, place across and signal of each footprint pixel.
func (l *line) each(f func(t, s, v float64)) {
	for i, in := range l.w.foot {
		if in {
			dx, dy := float64(l.w.x0+i%l.w.width)-l.x, float64(l.w.y0+i/l.w.width)-l.y
			f(dx*l.cos+dy*l.sin, dy*l.cos-dx*l.sin, float64(l.w.signal[i]))
		}
	}
}

// mid returns the place along of the middle of bin k.
func (l *line) mid(k int) float64 { return l.t0 + (float64(k)+0.5)*l.bin }

// ends returns where along the axis the flux rises to half its median and falls from it.
func (l *line) ends() (a, b float64, ok bool) {
	top := slices.Max(l.flux)
	var high []float64
	for _, f := range l.flux {
		if f > 0.2*top {
			high = append(high, f)
		}
	}
	if len(high) < 3 {
		return 0, 0, false
	}
	half := median(high) / 2
	if half <= 0 {
		return 0, 0, false
	}
	l.settle(half / 2)
	first, last := -1, -1
	for k, f := range l.flux {
		if f >= half {
			last = k
			if first < 0 {
				first = k
			}
		}
	}
	return l.crossing(first, first-1, half), l.crossing(last, last+1, half), last > first
}

// crossing interpolates between bin in, at or above half, and its neighbour out.
func (l *line) crossing(in, out int, half float64) float64 {
	f := 0.
	if out >= 0 && out < len(l.flux) {
		f = l.flux[out]
	}
	share := (l.flux[in] - half) / (l.flux[in] - f)
	return l.mid(in) + share*float64(out-in)*l.bin
}

// across returns the course's place across the axis at t.
func (l *line) across(t float64, first, last int) float64 {
	c := (t-l.t0)/l.bin - 0.5
	k := min(max(int(math.Floor(c)), first), max(last-1, first))
	n := min(k+1, last)
	return l.cross[k] + min(max(c-float64(k), -1), 2)*(l.cross[n]-l.cross[k])
}

// inner returns the bins whose middles lie between a and b.
func (l *line) inner(a, b float64) (first, last int) {
	first = max(int(math.Ceil((a-l.t0)/l.bin-0.5)), 0)
	last = min(int(math.Floor((b-l.t0)/l.bin-0.5)), len(l.flux)-1)
	return first, max(last, first)
}

// path returns the course from a to b in frame coordinates.
func (l *line) path(a, b float64) []Point {
	first, last := l.inner(a, b)
	at := func(t, s float64) Point {
		return Point{l.x + t*l.cos - s*l.sin, l.y + t*l.sin + s*l.cos}
	}
	out := []Point{at(a, l.across(a, first, last))}
	for k := first; k <= last; k++ {
		if l.mid(k) > a && l.mid(k) < b {
			out = append(out, at(l.mid(k), l.cross[k]))
		}
	}
	return append(out, at(b, l.across(b, first, last)))
}

// width returns the full width at half height of the mean profile across the course. A
// pixel counts in the bins within 1 px of it, less with distance, so that none is empty.
func (l *line) width(a, b float64) (float64, bool) {
	var sum, n [profileBins]float64
	first, last := l.inner(a, b)
	l.each(func(t, s, v float64) {
		if t < a || t > b {
			return
		}
		slope := (l.across(t+1, first, last) - l.across(t-1, first, last)) / 2
		o := (s - l.across(t, first, last)) / math.Hypot(1, slope)
		for k := profileBins/2 + int(math.Floor(o/profileStep)) - 1; k <= profileBins/2+int(math.Floor(o/profileStep))+2; k++ {
			if share := 1 - math.Abs(float64(k-profileBins/2)*profileStep-o); k >= 0 && k < profileBins && share > 0 {
				sum[k] += share * v
				n[k] += share
			}
		}
	})
	for k := range sum {
		if n[k] > 0 {
			sum[k] /= n[k]
		}
	}
	return fullWidth(sum[:], profileStep)
}

// fullWidth returns the full width at half height of a profile that is highest near
// its middle, with linear interpolation. The height is the highest of the nine values
// about the middle: each is a mean along the whole course.
func fullWidth(v []float64, step float64) (float64, bool) {
	mid := len(v) / 2
	top := mid
	for k := mid - 4; k <= mid+4; k++ {
		if v[k] > v[top] {
			top = k
		}
	}
	half := v[top] / 2
	if half <= 0 {
		return 0, false
	}
	width := 0.
	for _, dir := range []int{-1, 1} {
		k := top
		for k+dir >= 0 && k+dir < len(v) && v[k+dir] >= half {
			k += dir
		}
		if k+dir < 0 || k+dir >= len(v) {
			return 0, false
		}
		width += math.Abs(float64(k-top)) + (v[k]-half)/(v[k]-v[k+dir])
	}
	return width * step, true
}
