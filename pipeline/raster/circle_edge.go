package raster

import "math"

// edgeStep is the distance between two samples along a ray, px.
const edgeStep = 0.5

// edgePoints walks along rays from reach px inside the circle to reach px outside and
// returns the places of the steepest slope of the wanted sign, refined by a
// parabola through three slopes; and how many rays lay wholly in the frame. Each sample
// is the mean of nine side by side, so that a single bright pixel is no edge.
func edgePoints(src *Plane, c Circle, reach float64, s CircleSearch) (points []Point, rays int) {
	n := int(2*reach/edgeStep) + 1
	profile := make([]float64, n)
	for k := range s.Rays {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / float64(s.Rays))
		if !rayProfile(profile, src, c, reach, cos, sin) {
			continue
		}
		rays++
		find := steepestSlope
		if s.Ridge {
			find = crest
		}
		if at, ok := find(profile, s.DarkInside); ok {
			r := c.R - reach + at*edgeStep
			points = append(points, Point{c.X + r*cos, c.Y + r*sin})
		}
	}
	return points, rays
}

func rayProfile(dst []float64, src *Plane, c Circle, reach, cos, sin float64) bool {
	const beside = 4
	for i := range dst {
		r := c.R - reach + float64(i)*edgeStep
		sum := 0.
		for b := -beside; b <= beside; b++ {
			// Beside, along the circle and not along its tangent, so a small radius does not smear the edge.
			turn := float64(b) / max(c.R, 1)
			x, y := c.X+r*(cos-sin*turn), c.Y+r*(sin+cos*turn)
			norm := 1 / math.Sqrt(1+turn*turn)
			x, y = c.X+(x-c.X)*norm, c.Y+(y-c.Y)*norm
			v, ok := bilinear(src, x, y)
			if !ok {
				return false
			}
			sum += v
		}
		dst[i] = sum / (2*beside + 1)
	}
	return true
}

// steepestSlope returns where, in samples, a profile falls (rises, with rising) most
// steeply; false when it does so nowhere inside. A slope is the difference between the
// means of the four samples on either side.
func steepestSlope(p []float64, rising bool) (float64, bool) {
	return highest(len(p), 4, func(i int) float64 {
		d := p[i+1] - p[i-1] + p[i+2] - p[i-2] + p[i+3] - p[i-3] + p[i+4] - p[i-4]
		if rising {
			return d
		}
		return -d
	})
}

// crest returns where, in samples, a profile stands highest above the samples on
// either side: the mean of five against those four and five away.
func crest(p []float64, _ bool) (float64, bool) {
	return highest(len(p), 5, func(i int) float64 {
		return (p[i-2]+p[i-1]+p[i]+p[i+1]+p[i+2])/5 - (p[i-5]+p[i-4]+p[i+4]+p[i+5])/4
	})
}

// highest returns where f, which looks reach samples to either side, is highest and above
// 0, refined by a parabola through three values.
func highest(n, reach int, f func(i int) float64) (float64, bool) {
	best, at := 0., -1
	for i := reach + 1; i < n-reach-1; i++ {
		if v := f(i); v > best {
			best, at = v, i
		}
	}
	if at < 0 {
		return 0, false
	}
	a, b, c := f(at-1), best, f(at+1)
	if bend := a - 2*b + c; bend < 0 {
		return float64(at) + min(max((a-c)/(2*bend), -1), 1), true
	}
	return float64(at), true
}

// edgeWidth returns the distance over which the mean edge profile goes from 10 % to
// 90 % of the step between its two ends, px.
func edgeWidth(src *Plane, c Circle, s CircleSearch) float64 {
	const reach = 12
	n := int(2*reach/edgeStep) + 1
	mean, ray := make([]float64, n), make([]float64, n)
	rays := 0.
	for k := range s.Rays {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / float64(s.Rays))
		if rayProfile(ray, src, c, reach, cos, sin) {
			rays++
			for i, v := range ray {
				mean[i] += v
			}
		}
	}
	if rays == 0 {
		return 0
	}
	at, ok := steepestSlope(mean, s.DarkInside)
	if !ok {
		return 0
	}
	return riseWidth(mean, int(at+0.5), s.DarkInside) * edgeStep
}

// riseWidth returns the 10–90 % width, in samples, of the step at sample at. The plateaus
// are the nearest turning points on both sides of it.
func riseWidth(p []float64, at int, rising bool) float64 {
	sign := -1.
	if rising {
		sign = 1
	}
	low, high := at, at
	for low > 0 && sign*(p[low]-p[low-1]) > 0 {
		low--
	}
	for high+1 < len(p) && sign*(p[high+1]-p[high]) > 0 {
		high++
	}
	step := p[high] - p[low]
	if step == 0 {
		return 0
	}
	return math.Abs(crossLevel(p, low, high, p[low]+0.9*step) - crossLevel(p, low, high, p[low]+0.1*step))
}

// crossLevel returns where the monotonic stretch from low to high crosses a level.
func crossLevel(p []float64, low, high int, level float64) float64 {
	for i := low; i < high; i++ {
		if (p[i] <= level) != (p[i+1] <= level) {
			return float64(i) + (level-p[i])/(p[i+1]-p[i])
		}
	}
	return float64(high)
}
