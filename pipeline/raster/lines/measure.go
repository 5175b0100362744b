package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// The profile across a line: places on each side, every half pixel.
const (
	profileReach = 24
	profileStep  = 0.5
)

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
	_, along := f.profiles(l.Path, float64(c.sign), math.Inf(1))
	if len(along) == 0 {
		return l, false
	}
	across, _ := f.profiles(l.Path, float64(c.sign), spotHeight+3*median(along))
	l.Width, l.Contrast, l.Flux = fullWidth(across)
	l.Flux *= l.Length
	l.Peak = strongest(along)
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

// profiles returns the mean across the path, from −reach to reach, and the mean over 2 px
// across at each px along it; no value counts as more than most.
func (f *finder) profiles(path []raster.Point, sign, most float64) (across, along []float64) {
	n := int(2*profileReach/profileStep) + 1
	sum, count := make([]float64, n), make([]float64, n)
	for i := 1; i < len(path); i++ {
		p, q := path[i-1], path[i]
		d := distance(p, q)
		if d == 0 {
			continue
		}
		dx, dy := (q.X-p.X)/d, (q.Y-p.Y)/d
		for t := 0.5; t < d; t++ {
			middle, pixels := 0., 0.
			for k := range sum {
				o := float64(k)*profileStep - profileReach
				v, ok := f.sample(p.X+t*dx-o*dy, p.Y+t*dy+o*dx)
				if !ok {
					continue
				}
				v = min(sign*v, most)
				sum[k] += v
				count[k]++
				if math.Abs(o) <= 1 {
					middle, pixels = middle+v, pixels+1
				}
			}
			if pixels > 0 {
				along = append(along, middle/pixels)
			}
		}
	}
	for k := range sum {
		if count[k] > 0 {
			sum[k] /= count[k]
		}
	}
	return sum, along
}

// sample interpolates the plane; ok is false where a pixel does not count.
func (f *finder) sample(x, y float64) (float64, bool) {
	ix, iy := int(math.Floor(x)), int(math.Floor(y))
	if ix < 0 || iy < 0 || ix+1 >= f.plane.Width || iy+1 >= f.plane.Height || !f.region.At(ix, iy) || !f.region.At(ix+1, iy+1) {
		return 0, false
	}
	if f.bad != nil && (f.bad.At(ix, iy) || f.bad.At(ix+1, iy) || f.bad.At(ix, iy+1) || f.bad.At(ix+1, iy+1)) {
		return 0, false
	}
	u, v := x-float64(ix), y-float64(iy)
	top := (1-u)*float64(f.plane.At(ix, iy)) + u*float64(f.plane.At(ix+1, iy))
	low := (1-u)*float64(f.plane.At(ix, iy+1)) + u*float64(f.plane.At(ix+1, iy+1))
	z := (1-v)*top + v*low
	return z, !math.IsNaN(z) && !math.IsInf(z, 0)
}

// interpolated is the variance that linear interpolation adds across, on average: 1/6 px².
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

// strongest returns the highest sum of 5 px in a row in sigmas of unit noise: along holds
// means of 5 places across, half a pixel apart.
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

// alongVariance is the variance of the mean over 2 px across of unit noise, interpolated
// linearly both ways at random places, about 1/3.
const alongVariance = 1. / 3
