package emva

import (
	"errors"
	"math"
)

// Variances of EMVA Standard 1288 in DN².
const (
	Quantisation    = 1.0 / 12 // of rounding to whole counts
	MinDarkVariance = 0.24     // below it the dark noise is lost in the rounding: clipped there
)

// Level is mean and temporal variance of one brightness.
type Level struct {
	MeanDN      float64 `json:"mean_dn"`
	VarianceDN2 float64 `json:"variance_dn2"`
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
		panic("emva: a pair needs two frames of the same size")
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
	x, y := make([]float64, len(bright)), make([]float64, len(bright))
	for i, b := range bright {
		d := dark[min(i, len(dark)-1)]
		x[i], y[i] = b.MeanDN-d.MeanDN, b.VarianceDN2-d.VarianceDN2
	}
	if k, _ := slope(x, y); k > 0 && !math.IsInf(k, 0) {
		return k, nil
	}
	return 0, errors.New("system gain: the noise does not grow with the light, want frames as the sensor gives them, brighter than dark")
}

// DarkNoiseE returns the temporal dark noise in electrons, quantisation taken out:
// √(σ²_dark − 1/12) / K, with σ²_dark clipped from below (EMVA Standard 1288). It is 0
// where K is unknown.
func DarkNoiseE(darkVariance, gain float64) float64 {
	if gain <= 0 {
		return 0
	}
	return math.Sqrt(max(darkVariance, MinDarkVariance)-Quantisation) / gain
}

// slope returns the least-squares slope through the origin and its standard uncertainty
// from the scatter of the points, √(n/(n−1)·Σx²e²) / Σx² (White 1980, with the usual
// correction for one parameter): it holds when the scatter differs from point to point.
// The uncertainty of a single point is unknown: infinite.
func slope(x, y []float64) (b, uncertainty float64) {
	var xy, xx, scatter float64
	for i, v := range x {
		xy += v * y[i]
		xx += v * v
	}
	b = xy / xx
	for i, v := range x {
		scatter += v * v * (y[i] - b*v) * (y[i] - b*v)
	}
	n := float64(len(x))
	if n < 2 {
		return b, math.Inf(1)
	}
	return b, math.Sqrt(n/(n-1)*scatter) / xx
}
