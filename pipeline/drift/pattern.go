package drift

import (
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
const maxPatternUncertainty = 0.15

// Pattern holds the sensor's fixed pattern in a frame against the calibration's: the
// weighted mean, over the calibration's pattern pixels, of what the pixel stands out of its
// neighbours by (the median of its 5 × 5) over what it should,
//
//	expected = dark + response · (local level above dark)
//
// with weights 1/((σ/expected)² + 0.3²), σ the temporal noise. It is 1 for the same
// sensor in the same place, and near 0 when the picture moved against it: another camera,
// another read-out window, a mirrored picture. ok is false when the pattern is too faint in this
// light to be told.
func Pattern(raw *raster.Plane, maxCount int, c *pipeline.Calibration, b Bounds) (r Reading, ok bool) {
	sum, weights := 0.0, 0.0
	for _, p := range c.FixedPattern {
		ratio, w := patternRatio(raw, float32(maxCount), c, p)
		sum, weights = sum+w*ratio, weights+w
	}
	if !(weights > 1/(maxPatternUncertainty*maxPatternUncertainty)) {
		return Reading{}, false
	}
	return reading(pipeline.ProofPattern, sum/weights, 1/math.Sqrt(weights), b,
		"the sensor's own marks are not where they were: another camera, another read-out window, or a turned picture",
		"the sensor's own marks are stronger: is the camera hot?"), true
}

func patternRatio(raw *raster.Plane, top float32, c *pipeline.Calibration, p pipeline.PatternPixel) (ratio, weight float64) {
	if p.X < 2 || p.Y < 2 || p.X >= raw.Width-2 || p.Y >= raw.Height-2 {
		return 0, 0
	}
	v, local := raw.At(p.X, p.Y), around(raw, p.X, p.Y)
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
