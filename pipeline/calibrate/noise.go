package calibrate

import (
	"errors"
	"math"

	"lapgate/pipeline"
)

// Variances of EMVA Standard 1288 in DN².
const (
	quantisation    = 1.0 / 12 // of rounding to whole counts
	minDarkVariance = 0.24     // below it the dark noise is lost in the rounding: clipped there
)

// Level is mean and temporal variance of one brightness.
type Level struct {
	MeanDN      float64
	VarianceDN2 float64
}

// Pair returns the level of two frames of the same scene by EMVA Standard 1288:
//
//	μ  = (mean A + mean B) / 2
//	σ² = ½·mean((A − B)²) − ½·(mean A − mean B)²
//
// Fixed pattern and a change of the lamp between the two drop out. It panics when the
// lengths differ or are zero.
func Pair(a, b []uint16) Level {
	if len(a) != len(b) || len(a) == 0 {
		panic("calibrate: a pair needs two frames of the same size")
	}
	var sum, diff, square int64
	for i, v := range a {
		d := int64(v) - int64(b[i])
		sum += int64(v) + int64(b[i])
		diff += d
		square += d * d
	}
	n := float64(len(a))
	d := float64(diff) / n
	return Level{MeanDN: float64(sum) / (2 * n), VarianceDN2: float64(square)/(2*n) - d*d/2}
}

// SystemGain returns K in DN per electron: the slope through the origin of
// variance − dark variance against mean − dark mean (EMVA Standard 1288), by least
// squares over the levels. dark[i] belongs to bright[i]; a single dark serves all.
func SystemGain(bright, dark []Level) (float64, error) {
	if len(bright) == 0 || len(dark) != len(bright) && len(dark) != 1 {
		return 0, errors.New("system gain: want a dark level for each bright one, or one for all")
	}
	var xy, xx float64
	for i, b := range bright {
		d := dark[min(i, len(dark)-1)]
		x := b.MeanDN - d.MeanDN
		xy += x * (b.VarianceDN2 - d.VarianceDN2)
		xx += x * x
	}
	if k := xy / xx; k > 0 && !math.IsInf(k, 0) {
		return k, nil
	}
	return 0, errors.New("system gain: the noise does not grow with the light, want frames as the sensor gives them, brighter than dark")
}

// noiseModel puts a dark variance and K together; quantisation stays in the dark noise.
func noiseModel(gain, darkVariance float64) pipeline.NoiseModel {
	return pipeline.NoiseModel{GainDNPerE: gain, DarkDN: math.Sqrt(max(darkVariance, minDarkVariance))}
}

// DarkNoiseE returns the temporal dark noise in electrons, quantisation taken out:
// √(σ²_dark − 1/12) / K (EMVA Standard 1288). It is 0 where K is unknown.
func DarkNoiseE(n pipeline.NoiseModel) float64 {
	if n.GainDNPerE <= 0 {
		return 0
	}
	return math.Sqrt(max(n.DarkDN*n.DarkDN-quantisation, 0)) / n.GainDNPerE
}
