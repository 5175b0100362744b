package lines

import (
	"math"

	"lapgate/pipeline/raster"
)

// shape is the profile of a line: a band of some width through a blur, px.
type shape struct{ at, width, blur float64 }

// pixelVariance is that of a pixel's own width, px², and rowVariance what taking rows
// between two pixels adds along their axis, on average over all places between them.
const pixelVariance, rowVariance = 1. / 12, 1. / 6

const mostBlur = 1.6 // px

// rowBlur is the variance that taking rows adds across a path, px².
func rowBlur(path []raster.Point) float64 {
	sum, length := 0., 0.
	for i := 1; i < len(path); i++ {
		dx, dy := path[i].X-path[i-1].X, path[i].Y-path[i-1].Y
		if d := math.Hypot(dx, dy); d > 0 {
			sum, length = sum+max(dx*dx, dy*dy)/d, length+d
		}
	}
	return rowVariance * sum / length
}

// value is the shape at an offset, 1 where a wide band is whole.
func (s shape) value(o float64) float64 {
	k := 1 / (math.Sqrt2 * s.blur)
	return 0.5 * (erf((o-s.at+s.width/2)*k) - erf((o-s.at-s.width/2)*k))
}

// unrowed is the shape without a variance that taking rows added.
func (s shape) unrowed(rows float64) shape {
	s.at, s.blur = 0, math.Sqrt(s.blur*s.blur-rows)
	return s
}

// fullWidth is the full width at half height.
func (s shape) fullWidth() float64 {
	half := s.value(s.at) / 2
	low, high := 0., s.width/2+4*s.blur
	for range 40 {
		if middle := (low + high) / 2; s.value(s.at+middle) > half {
			low = middle
		} else {
			high = middle
		}
	}
	return 2 * low
}

// mostPlaces is how many places a profile has at most.
const mostPlaces = 2*mostProfile/profileStep + 1

// fitted is a shape of some height on a level.
type fitted struct {
	shape
	height, level, misfit float64
}

// fit sets height and level to fit v from bin first on, by least squares.
func (s shape) fit(v []float64, first int, reach float64) fitted {
	n, sg, sgg, sv, svg := 0., 0., 0., 0., 0.
	var room [mostPlaces]float64
	g := room[:len(v)]
	k := 1 / (math.Sqrt2 * s.blur)
	from, wide, step := (float64(first)*profileStep-reach-s.at)*k, s.width/2*k, profileStep*k
	for i := range v {
		at := from + float64(i)*step
		g[i] = 0.5 * (erf(at+wide) - erf(at-wide))
		n, sg, sgg, sv, svg = n+1, sg+g[i], sgg+g[i]*g[i], sv+v[i], svg+v[i]*g[i]
	}
	out := fitted{shape: s, misfit: math.Inf(1)}
	if d := n*sgg - sg*sg; d > 0 {
		out.height, out.level = (n*svg-sv*sg)/d, (sv*sgg-sg*svg)/d
	}
	if out.height <= 0 {
		return out
	}
	out.misfit = 0
	for i := range v {
		e := v[i] - out.level - out.height*g[i]
		out.misfit += e * e
	}
	return out
}

// fitShape finds the shape that fits a profile best near its middle, beginning with its
// width at half height; rows is the variance of taking them. ok is false where nothing
// stands out.
func fitShape(v []float64, reach, rows float64) (fitted, bool) {
	top, wide := peakOf(v)
	if top < 0 {
		return fitted{}, false
	}
	leastBlur := math.Sqrt(pixelVariance + rows)
	look := int(max(3, wide) / profileStep)
	first, last := max(top-look, 0), min(top+look, len(v)-1)
	part := v[first : last+1]
	best := shape{at: float64(top)*profileStep - reach, width: max(wide, 1), blur: 0.8}.fit(part, first, reach)
	for step := 0.5; step > 0.01; step /= 2 {
		for range 12 {
			better := best
			for _, d := range []float64{-step, step} {
				for _, s := range []shape{{best.at + d, best.width, best.blur}, {best.at, best.width * (1 + d), best.blur}, {best.at, best.width, best.blur * (1 + d)}} {
					if s.width < 0.3 || s.width > 2*reach || s.blur < leastBlur || s.blur > mostBlur {
						continue
					}
					if x := s.fit(part, first, reach); x.misfit < better.misfit {
						better = x
					}
				}
			}
			if better.misfit >= best.misfit {
				break
			}
			best = better
		}
	}
	return best, !math.IsInf(best.misfit, 1)
}

// peakOf returns where a profile is highest within 3 px of its middle, and how wide it is at
// half of that; −1 where it nowhere stands out.
func peakOf(v []float64) (top int, wide float64) {
	middle := len(v) / 2
	top = middle
	for k := max(middle-6, 0); k <= min(middle+6, len(v)-1); k++ {
		if v[k] > v[top] {
			top = k
		}
	}
	if v[top] <= 0 {
		return -1, 0
	}
	for _, dir := range []int{-1, 1} {
		for k := top + dir; k >= 0 && k < len(v) && v[k] >= v[top]/2; k += dir {
			wide += profileStep
		}
	}
	return top, wide + profileStep
}
