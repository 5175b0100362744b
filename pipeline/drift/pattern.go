package drift

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// patternDrift is how much a single pixel of the pattern may change, relative to itself,
// without the pattern having changed: dark current doubles every few kelvin.
const patternDrift = 0.3

// maxPatternUncertainty is the standard uncertainty beyond which a frame says nothing of
// the pattern.
const maxPatternUncertainty = 0.1

// patternReach is how far, in px, a picture that moved is followed.
const patternReach = 6

// Pattern holds the sensor's fixed pattern in a frame against the calibration's: the
// weighted median, over the calibration's pattern pixels, of what the pixel stands out of
// its neighbours by (the median of its 5 × 5) over what it should,
//
//	expected = dark + response · (local level above dark)
//
// with weights 1/((σ/expected)² + 0.3²), σ the temporal noise. It is 1 for the same
// sensor in the same place, and near 0 when the picture moved against it: another camera,
// another read-out window, a mirrored picture. A defect or an edge over some of the pixels
// does not move a median. ok is false when the pattern is too faint in this light to be
// told.
func Pattern(raw *raster.Plane, maxCount int, c *pipeline.Calibration, b Bounds) (r Reading, ok bool) {
	if c.Dark == nil || !c.Dark.SameSize(raw) {
		return Reading{}, false
	}
	value, uncertainty, ok := patternAt(raw, float32(maxCount), c, 0, 0)
	if !ok {
		return Reading{}, false
	}
	r = reading(pipeline.ProofPattern, value, uncertainty, b,
		"the sensor's own marks are not where they were: another camera, another read-out window, or a turned picture",
		"the sensor's own marks are stronger: is the camera hot?")
	if r.State == Held && value < b.HoldBelow {
		if dx, dy, found := moved(raw, float32(maxCount), c, b); found {
			r.Cause = fmt.Sprintf("the sensor's own marks lie (%+d, %+d) px from where they were, so the read-out window moved; calibrate again", dx, dy)
		}
	}
	return r, true
}

// moved returns the shortest shift at which the pattern is in place.
func moved(raw *raster.Plane, top float32, c *pipeline.Calibration, b Bounds) (dx, dy int, ok bool) {
	for reach := 1; reach <= patternReach; reach++ {
		for dy := -reach; dy <= reach; dy++ {
			for dx := -reach; dx <= reach; dx++ {
				if max(dx, -dx, dy, -dy) != reach {
					continue
				}
				if v, _, known := patternAt(raw, top, c, dx, dy); known && v >= max(b.WarnBelow, 0.5) {
					return dx, dy, true
				}
			}
		}
	}
	return 0, 0, false
}

// patternAt returns the weighted median with the picture shifted by (dx, dy), and the
// uncertainty that the weights give a mean.
func patternAt(raw *raster.Plane, top float32, c *pipeline.Calibration, dx, dy int) (value, uncertainty float64, ok bool) {
	type weighted struct{ ratio, weight float64 }
	var list []weighted
	sum := 0.
	for _, p := range c.FixedPattern {
		if ratio, w := patternRatio(raw, top, c, p, dx, dy); w > 0 {
			list, sum = append(list, weighted{ratio, w}), sum+w
		}
	}
	if !(sum > 1/(maxPatternUncertainty*maxPatternUncertainty)) {
		return 0, 0, false
	}
	slices.SortFunc(list, func(a, b weighted) int { return cmp.Compare(a.ratio, b.ratio) })
	below := 0.
	for _, one := range list {
		if below += one.weight; below >= sum/2 {
			return one.ratio, 1 / math.Sqrt(sum), true
		}
	}
	return 0, 0, false
}

func patternRatio(raw *raster.Plane, top float32, c *pipeline.Calibration, p pipeline.PatternPixel, dx, dy int) (ratio, weight float64) {
	x, y := p.X+dx, p.Y+dy
	if min(x, y, p.X, p.Y) < 2 || max(x, p.X) >= raw.Width-2 || max(y, p.Y) >= raw.Height-2 {
		return 0, 0
	}
	v, local := raw.At(x, y), around(raw, x, y)
	if v >= top || local >= top {
		return 0, 0
	}
	level := max(float64(local)-float64(around(c.Dark, p.X, p.Y)), 0)
	expected := p.DarkDN + p.Response*level
	if math.Abs(expected) < 1e-3 {
		return 0, 0
	}
	sigma := math.Sqrt(c.Noise.DarkDN*c.Noise.DarkDN+c.Noise.GainDNPerE*level) / expected
	return float64(v-local) / expected, 1 / (sigma*sigma + patternDrift*patternDrift)
}

// around returns the median of the 5 × 5 about a pixel that is at least 2 px inside.
func around(p *raster.Plane, x, y int) float32 {
	var near [25]float32
	for k := range 5 {
		copy(near[5*k:], p.Row(y - 2 + k)[x-2:x+3])
	}
	slices.Sort(near[:])
	return near[12]
}
