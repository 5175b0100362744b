package lines

// #include "lines.h"
import "C"

import "math"

const (
	taps      = C.LN_TAPS
	entry     = C.LN_ENTRY
	fractions = C.LN_FRACTIONS
	weightOne = C.LN_WEIGHT
	slopes    = 16 // bins of slope from 0 to 1, both included
)

// weights are what pixels across a line count by its slope: the share of each pixel that a
// line of some width covers.
type weights [slopes + 1][fractions * entry]C.int16_t

// newWeights is for lines of the given width, px.
func newWeights(width float64) *weights {
	out := &weights{}
	for s := range out {
		angle := math.Atan(float64(s) / slopes)
		for f := range fractions {
			for k := range taps {
				d := (float64(k-1) - (float64(f)+0.5)/fractions) * math.Cos(angle)
				w := C.int16_t(math.Round(weightOne * covered(d, angle, width)))
				out[s][f*entry+k] = w
				out[s][f*entry+C.LN_SQUARES] += w * w
			}
		}
	}
	return out
}

// covered is the share of a pixel at distance d from the line's middle that the line covers:
// a band of the given width over a unit square turned by angle.
func covered(d, angle, width float64) float64 {
	const n = 64
	sin, cos := math.Sincos(angle)
	sum := 0.
	for i := range n {
		at := d + sin*((float64(i)+0.5)/n-0.5)
		low, high := max(at-cos/2, -width/2), min(at+cos/2, width/2)
		sum += max(high-low, 0) / cos
	}
	return sum / n
}

// of returns the weights of a slope.
func (w *weights) of(slope float64) *C.int16_t {
	return &w[int(math.Round(min(math.Abs(slope), 1)*slopes))][0]
}

// square is the mean sum of the weights' squares at one position.
func (w *weights) square(slope float64) float64 {
	k, sum := w[int(math.Round(min(math.Abs(slope), 1)*slopes))], 0.
	for f := range fractions {
		sum += float64(k[f*entry+C.LN_SQUARES])
	}
	return sum / (fractions * weightOne * weightOne)
}
