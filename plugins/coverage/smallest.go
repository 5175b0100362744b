package coverage

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// optics is what turns a size into the height of its peak in the filtered picture.
type optics struct {
	sigmaPx float64 // of point spread, pixel, matched filter and the place between pixels
	umPerPx float64
}

// defaultBlurPx is the sigma of a lens whose blur nobody measured.
const defaultBlurPx = 0.8

func opticsOf(s Settings, c *pipeline.Calibration, umPerPx float64) optics {
	blur := s.BlurPx
	if blur == 0 && c != nil && c.Sizing != nil && c.Sizing.BlurWidthPx > 0 {
		blur = c.Sizing.BlurWidthPx / (2 * math.Sqrt(2*math.Ln2))
	}
	if blur == 0 {
		blur = defaultBlurPx
	}
	before := math.Sqrt(blur*blur + 1./12)
	return optics{sigmaPx: math.Hypot(before, 1) / samplingGain(before), umPerPx: umPerPx}
}

// phases is how many places between two pixels are averaged.
const phases = 21

// samplingGain is what the nearest pixel of a line spread of sigma px shows after the
// 5-tap binomial filter, in the mean over all places between pixels, over what a Gaussian
// filter of 1 px would show at its very middle: 0.95 for sharp optics.
func samplingGain(sigma float64) float64 {
	weights := [5]float64{1. / 16, 4. / 16, 6. / 16, 4. / 16, 1. / 16}
	sum := 0.
	for k := range phases {
		at := (float64(k)+0.5)/phases - 0.5
		for i, w := range weights {
			d := (float64(i-2) - at) / sigma
			sum += w * math.Exp(-d*d/2) / sigma
		}
	}
	return sum / phases * math.Hypot(sigma, 1)
}

// needed is the peak that reaches the threshold, DN.
func needed(kHigh, noiseDN float64) float64 { return kHigh * noiseDN * raster.MatchedGain }

// discUM returns the diameter of the smallest disc of a contrast that is found in a
// noise; false where none is.
func (o optics) discUM(contrastDN, kHigh, noiseDN float64) (float64, bool) {
	share := needed(kHigh, noiseDN) / contrastDN
	if !(share < 1) {
		return 0, false
	}
	return 2 * o.sigmaPx * math.Sqrt(-2*math.Log(1-share)) * o.umPerPx, true
}

// scratchUM returns the width of the faintest long scratch of a contrast that is found.
func (o optics) scratchUM(contrastDN, kHigh, noiseDN float64) (float64, bool) {
	share := needed(kHigh, noiseDN) / contrastDN
	if !(share < 1) {
		return 0, false
	}
	return 2 * math.Sqrt2 * o.sigmaPx * math.Erfinv(share) * o.umPerPx, true
}

// curveSteps is how many diameters are tried for each doubling.
const curveSteps = 32

// onCurveUM returns the diameter of the smallest dot on a sizing curve, at a share of its
// light, that is found. With exponents below 2 large dots are fainter than small ones, so
// the first diameter that reaches the threshold counts.
func (o optics) onCurveUM(z pipeline.Sizing, light, kHigh, noiseDN float64) (float64, bool) {
	want := needed(kHigh, noiseDN)
	for k := 0; ; k++ {
		d := 0.05 * o.umPerPx * math.Exp2(float64(k)/curveSteps)
		if d > 1000*o.umPerPx {
			return 0, false
		}
		px := d / o.umPerPx
		contrast := light * z.FluxDNPx * math.Pow(d/z.ReferenceUM, z.Exponent) / (math.Pi / 4 * px * px)
		if contrast*(1-math.Exp(-px*px/(8*o.sigmaPx*o.sigmaPx))) >= want {
			return d, true
		}
	}
}
