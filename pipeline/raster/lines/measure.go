package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// The profile across a line reaches to each side so far, px; the second time where it has not
// fallen to half of its height before.
var profileReaches = [...]float64{7, 24}

const profileStep = 0.5

// profilePlaces is at how many positions of a long line its profile is taken at least.
const profilePlaces = 120

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
// is as wide as the line is long.
func (f *finder) measure(c course) (Line, bool) {
	l := Line{Path: f.path(c), Sigmas: c.sigmas(), White: c.white(), Dark: c.sign < 0}
	for i := 1; i < len(l.Path); i++ {
		l.Length += distance(l.Path[i-1], l.Path[i])
	}
	a, b := l.Path[0], l.Path[len(l.Path)-1]
	l.Angle = fold(math.Atan2(b.Y-a.Y, b.X-a.X) * 180 / math.Pi)
	at := f.profiles(l.Path, float64(c.sign), 1, math.Inf(1), 1)
	if len(at.along) == 0 {
		return l, false
	}
	for _, reach := range profileReaches {
		across := f.profiles(l.Path, float64(c.sign), reach, spotHeight+3*median(at.along), max(int(l.Length)/profilePlaces, 1))
		l.Width, l.Contrast, l.Flux = fullWidth(across.sum)
		if l.Width < reach {
			break
		}
	}
	l.Flux *= l.Length
	l.Peak = strongest(at.along)
	return l, l.Width > 0 && l.Length >= leastRatio*l.Width
}

// spotHeight is how high, beyond three times a line's median, a pixel beside it counts at
// most: a spot that the line crosses must not widen it.
const spotHeight = 5

func median(v []float64) float64 { return middle(slices.Clone(v)) }

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

// profile gathers the pixels about a path by their distance from it.
type profile struct {
	f          *finder
	sign, most float64 // no value counts as more than most
	reach      float64 // px to either side
	stride     int     // positions from one to the next that is looked at
	sum, count []float64
	along      []float64 // at each position, the mean about the path itself
}

// profiles returns the mean across the path, from −reach to reach, and the mean at the path
// at each position along it. A pixel counts in the bins within 1 px of it, less with distance.
func (f *finder) profiles(path []raster.Point, sign, reach, most float64, stride int) profile {
	n := 2*int(reach/profileStep) + 1
	p := profile{f: f, sign: sign, most: most, reach: reach, stride: stride, sum: make([]float64, n), count: make([]float64, n)}
	for i := 1; i < len(path); i++ {
		if k, ok := between(path[i-1], path[i]); ok {
			p.add(k)
		}
	}
	for k := range p.sum {
		if p.count[k] > 0 {
			p.sum[k] /= p.count[k]
		}
	}
	return p
}

func (p *profile) add(k stretch) {
	slope := k.slope()
	cos := 1 / math.Hypot(1, slope)
	for m := k.a; m <= k.b; m += p.stride {
		c, middle, weight := k.ca+slope*float64(m-k.a), 0., 0.
		for j := int(math.Ceil(c - p.reach/cos)); j <= int(math.Floor(c+p.reach/cos)); j++ {
			x, y := j, m
			if k.axis == 1 {
				x, y = m, j
			}
			v, ok := p.f.pixel(x, y)
			if !ok {
				continue
			}
			o := (float64(j) - c) * cos
			v = min(p.sign*v, p.most)
			p.put(o, v)
			if share := 1 - math.Abs(o); share > 0 {
				middle, weight = middle+share*v, weight+share
			}
		}
		if weight > 0 {
			p.along = append(p.along, middle/weight)
		}
	}
}

func (p *profile) put(o, v float64) {
	first := int(math.Ceil((o - 1 + p.reach) / profileStep))
	for b := max(first, 0); b < len(p.sum); b++ {
		share := 1 - math.Abs(float64(b)*profileStep-p.reach-o)
		if share <= 0 {
			return
		}
		p.sum[b] += share * v
		p.count[b] += share
	}
}

// pixel returns the plane's value where it counts.
func (f *finder) pixel(x, y int) (float64, bool) {
	if !f.region.At(x, y) || f.bad != nil && f.bad.At(x, y) {
		return 0, false
	}
	v := float64(f.plane.At(x, y))
	return v, !math.IsNaN(v) && !math.IsInf(v, 0)
}

// interpolated is the variance that gathering within 1 px adds across, that of a triangle:
// 1/6 px².
const interpolated = 1. / 6

// fullWidth returns the full width at half height of a profile that is highest within 3 px
// of its middle, less what interpolation adds, its height, and its sum over the peak.
func fullWidth(v []float64) (width, height, flux float64) {
	middle := len(v) / 2
	top := middle
	for k := middle - 6; k <= middle+6; k++ {
		if v[k] > v[top] {
			top = k
		}
	}
	height = v[top]
	if height <= 0 {
		return 0, 0, 0
	}
	flux = v[top] * profileStep
	for _, dir := range []int{-1, 1} {
		k := top
		for k+dir >= 0 && k+dir < len(v) && v[k+dir] >= height/2 {
			k += dir
			flux += v[k] * profileStep
		}
		width += math.Abs(float64(k-top)) * profileStep
		if k+dir >= 0 && k+dir < len(v) {
			width += profileStep * (v[k] - height/2) / (v[k] - v[k+dir])
		}
		for k += dir; k >= 0 && k < len(v) && v[k] > 0; k += dir { // the foot
			flux += v[k] * profileStep
		}
	}
	return math.Sqrt(max(width*width-8*math.Ln2*interpolated, 0.25)), height, flux
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
