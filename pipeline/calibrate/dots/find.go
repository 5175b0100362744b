// Package dots finds the dots of a calibration target in a corrected picture and fits
// scale, distortion and a sizing curve to them. It reads no frames and makes no
// calibration.
package dots

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// Dot is a dot that was found.
type Dot struct {
	X, Y       float64 // centroid, px
	DiameterPx float64 // at half of its own height
	Flux       float64 // DN·px
	SNR        float64
	Dark       bool
	Saturated  bool
}

// Thresholds say what is a dot. Take DefaultThresholds and change what needs changing.
type Thresholds struct {
	KLow, KHigh float64 // as the stage blobs has them
	LowShare    float64 // of the typical peak: the low threshold is at least that, so that halos do not join
	MaxRatio    float64 // length over width
}

// DefaultThresholds are those of the stage blobs, for dots that are round within a third.
func DefaultThresholds() Thresholds { return Thresholds{KLow: 3.5, KHigh: 6, MaxRatio: 4. / 3} }

// GridThresholds are for a target of equal dots side by side.
func GridThresholds() Thresholds {
	t := DefaultThresholds()
	t.LowShare = 0.15
	return t
}

// Find returns the round spots of a picture that touch neither its border nor a bad
// pixel, bright or dark, whichever are more, in the order of their first pixel. Level and noise are
// measured as the stage darkfield does; spots are measured as the stage blobs does.
// bad and saturated may be nil.
func Find(corrected *raster.Plane, bad, saturated *raster.Mask, th Thresholds) []Dot {
	all := raster.NewMask(corrected.Width, corrected.Height)
	for i := range all.Bits {
		all.Bits[i] = true
	}
	signal, noise, snr := contrast(corrected, all, bad)
	blobs := raster.Label(snr, float32(th.KLow), float32(th.KHigh))
	if low := th.LowShare * typicalPeak(blobs); low > th.KLow {
		blobs = raster.Label(snr, float32(low), float32(max(low, th.KHigh)))
	}
	m := raster.NewMeasurer(signal, noise, all, blobs)
	var bright, dark []Dot
	for i, b := range blobs {
		s := m.Measure(i)
		if s.X0 <= 2 || s.Y0 <= 2 || s.X1 >= corrected.Width-2 || s.Y1 >= corrected.Height-2 ||
			s.Length > th.MaxRatio*s.Width || touches(bad, b.Spans) {
			continue
		}
		d := Dot{X: s.X, Y: s.Y, DiameterPx: s.Diameter, Flux: s.Flux, SNR: s.SNR, Dark: s.Dark, Saturated: touches(saturated, b.Spans)}
		if s.Dark {
			dark = append(dark, d)
		} else {
			bright = append(bright, d)
		}
	}
	if len(dark) > len(bright) {
		return dark
	}
	return bright
}

// contrast returns signal, noise and the size of the matched filter's output in sigmas.
func contrast(corrected *raster.Plane, all, bad *raster.Mask) (signal, noise, snr *raster.Plane) {
	plane := func() *raster.Plane { return raster.NewPlane(corrected.Width, corrected.Height) }
	level, filtered := plane(), plane()
	signal, noise, snr = plane(), plane(), plane()
	settings := raster.DefaultGrid()
	settings.Grain = false // the dots are no grain
	raster.MeasureGrid(corrected, all, bad, settings).Interpolate(level, noise)
	raster.Subtract(signal, corrected, level)
	raster.MatchedFilter(filtered, signal, all)
	raster.SNR(snr, filtered, noise)
	for i, v := range snr.Pix {
		snr.Pix[i] = max(v, -v)
	}
	return signal, noise, snr
}

func typicalPeak(blobs []raster.Blob) float64 {
	if len(blobs) == 0 {
		return 0
	}
	peaks := make([]float64, len(blobs))
	for i, b := range blobs {
		peaks[i] = float64(b.Peak)
	}
	return median(peaks)
}

func median(v []float64) float64 {
	s := slices.Sorted(slices.Values(v))
	return (s[(len(s)-1)/2] + s[len(s)/2]) / 2
}

func touches(m *raster.Mask, spans []raster.Span) bool {
	if m == nil {
		return false
	}
	for _, s := range spans {
		for y := s.Y - 1; y <= s.Y+1; y++ {
			for x := s.X0 - 1; x <= s.X1; x++ {
				if m.At(x, y) {
					return true
				}
			}
		}
	}
	return false
}

func distance(a, b Dot) float64 { return math.Hypot(a.X-b.X, a.Y-b.Y) }
