package lines

import (
	"math"

	"lapgate/pipeline/raster"
)

// The profile across a line reaches to each side so far, px; further where the line is wide.
var profileReaches = [...]float64{5, 12, mostProfile}

const mostProfile = 24

// wideShare is the share of the reach that a line's width may be.
const wideShare = 0.7

// leastRatio is the length over the width that a line has at least.
const leastRatio = 4

// scale is how many pixels of the plane one of the picture searched is across.
func (f *finder) scale() float64 {
	if f.s.Half {
		return 2
	}
	return 1
}

func (f *finder) rim() float64 { return f.s.Rim * f.scale() }

// path returns the course in pixels of the plane.
func (f *finder) path(c course) []raster.Point {
	out := make([]raster.Point, len(c.points))
	s := f.scale()
	for i, p := range c.points {
		out[i] = raster.Point{X: s*(p.X+0.5) - 0.5, Y: s*(p.Y+0.5) - 0.5}
	}
	return out
}

// measure takes the measures of a line on the plane itself; ok is false where the profile
// is as wide as the line is long, or a few spots are all that the plane shows.
func (f *finder) measure(c course) (Line, bool) {
	l := Line{Path: f.path(c), Sigmas: c.sigmas(), White: c.white(), Dark: c.sign < 0}
	blur := rowBlur(l.Path)
	best, ok := f.fitAcross(&l, float64(c.sign), blur)
	if !ok {
		return l, false
	}
	seen := best.unrowed(blur)
	l.Width, l.Contrast = seen.fullWidth(), best.height*seen.value(0)
	for i := 1; i < len(l.Path); i++ {
		l.Length += distance(l.Path[i-1], l.Path[i])
	}
	l.Flux = best.height * best.width * l.Length
	a, b := l.Path[0], l.Path[len(l.Path)-1]
	l.Angle = fold(math.Atan2(b.Y-a.Y, b.X-a.X) * 180 / math.Pi)
	middle := along(f.rows(l.Path, float64(c.sign), 0, nil))
	l.Peak = strongest(middle)
	return l, l.Width > 0 && l.Length >= leastRatio*l.Width && f.stays(middle, l.Width)
}

// fitAcross moves the path onto the line's course and fits the profile across it.
func (f *finder) fitAcross(l *Line, sign, blur float64) (best fitted, ok bool) {
	length := 0.
	for i := 1; i < len(l.Path); i++ {
		length += distance(l.Path[i-1], l.Path[i])
	}
	m := &f.work.sampled
	for _, reach := range profileReaches {
		rows := f.rows(l.Path, sign, reach, nil)
		if best, ok = fitShape(m.across(rows), reach, blur); !ok {
			return best, false
		}
		bent := m.bend(rows, length, l.White, best.unrowed(blur).fullWidth())
		if len(bent) > 0 {
			best, ok = fitShape(m.across(f.rows(l.Path, sign, reach, bent)), reach, blur)
		}
		if best.fullWidth() < wideShare*reach || reach == profileReaches[len(profileReaches)-1] {
			l.Path = bent.bent(l.Path)
			return best, ok
		}
	}
	return best, ok
}

// fold brings an angle between −90 and 90 degrees.
func fold(angle float64) float64 {
	switch {
	case angle <= -90:
		return angle + 180
	case angle > 90:
		return angle - 180
	}
	return angle
}

// strongest returns the highest sum of 5 positions in a row in sigmas of unit noise.
func strongest(along []float64) float64 {
	const n = 5
	best := 0.
	for i := 0; i+n <= len(along); i++ {
		sum := 0.
		for _, v := range along[i : i+n] {
			sum += v
		}
		best = max(best, sum/math.Sqrt(n*alongVariance))
	}
	return best
}

// alongVariance is the variance of the mean of two pixels with weights 1 − f and f, of unit
// noise, over all f: 2/3.
const alongVariance = 2. / 3
