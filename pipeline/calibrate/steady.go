package calibrate

import (
	"fmt"
	"math"

	"lapgate/pipeline/calibrate/emva"
)

// Limits on what noise can do to a tile. A tile of 1 024 pixels gives its variance to
// 4.4 % (√(2/n)) and its mean to σ/32, so eight of those are never chance.
const (
	chanceSigmas     = 8
	outlierSigmas    = 6
	outlierShare     = 0.01  // of a tile, or
	outlierPixels    = 3     // in a small one: more are not blinking pixels
	minVarianceRise  = 0.5   // of the variance expected
	minShiftDN       = 0.5   // of a tile's mean
	minShiftShare    = 0.005 // of a tile's mean above dark
	maxCorrelation   = 0.1   // of neighbours in the difference of two frames
	brightTileShare  = 0.25  // of the brightest tiles: what counts as lit
	correlationScale = 10    // sigmas of a correlation coefficient, 1/√n each
)

// scene is what is known when two frames are compared: the dark level, and K where it
// has been found.
type scene struct {
	dark  emva.Level
	gain  float64
	lit   bool // false for the dark frames themselves
	rules Rules
}

// checkSteady refuses frame b if it differs from the first frame a by more than noise
// allows: as a whole, or in a tile.
func (s scene) checkSteady(a, b []uint16, width int, tiles []tile) error {
	if err := s.checkMean(tiles); err != nil {
		return err
	}
	expected := s.expectedVariance(tiles)
	ratio := s.meanRatio(tiles)
	for i, t := range tiles {
		shift := ratio * (t.mean - s.dark.MeanDN)
		if s.explained(t, t.diff-shift, t.variance, expected[i]) {
			continue
		}
		diff, variance, share := t.inliers(a, b, width, outlierSigmas*math.Sqrt(2*expected[i]))
		if share <= max(outlierShare, outlierPixels/float64(t.n)) && s.explained(t, diff-shift, variance, expected[i]) {
			continue
		}
		return fmt.Errorf("differs more than noise allows from x %d to %d, y %d to %d (difference %.2f DN, variance %.2f DN², noise explains %.2f DN²): "+
			"something moved or the light changed; fix camera, lamp and target, and take the folder again",
			t.x0, t.x1-1, t.y0, t.y1-1, t.diff, t.variance, expected[i])
	}
	if s.lit {
		return s.checkWhite(a, b, width)
	}
	return nil
}

func (s scene) explained(t tile, diff, variance, expected float64) bool {
	n := float64(t.n)
	rise := max(minVarianceRise, chanceSigmas*math.Sqrt(2/(n-1)))
	reach := max(minShiftDN, minShiftShare*(t.mean-s.dark.MeanDN), chanceSigmas*math.Sqrt(2*expected/n))
	return variance <= (1+rise)*expected && math.Abs(diff) <= reach
}

// meanRatio returns the change of the light as a share of the mean above dark; it is 0
// for dark frames.
func (s scene) meanRatio(tiles []tile) float64 {
	mean, diff := wholeImage(tiles)
	if !s.lit || mean-s.dark.MeanDN < 1 {
		return 0
	}
	return diff / (mean - s.dark.MeanDN)
}

func (s scene) checkMean(tiles []tile) error {
	mean, diff := wholeImage(tiles)
	allowed := max(1, s.rules.UnsteadyShare*(mean-s.dark.MeanDN))
	if !s.lit {
		allowed = max(1, math.Sqrt(median(variances(tiles))))
	}
	if math.Abs(diff) > allowed {
		return fmt.Errorf("mean changed by %.2f DN, want at most %.2f: let lamp and camera warm up, keep out other light, and take the folder again", diff, allowed)
	}
	return nil
}

func wholeImage(tiles []tile) (mean, diff float64) {
	var n float64
	for _, t := range tiles {
		mean += float64(t.n) * t.mean
		diff += float64(t.n) * t.diff
		n += float64(t.n)
	}
	return mean / n, diff / n
}

// expectedVariance returns the noise each tile should have: dark noise plus K times the
// light, K being the median over the lit tiles where it is not known yet.
func (s scene) expectedVariance(tiles []tile) []float64 {
	out := make([]float64, len(tiles))
	typical := max(median(variances(tiles)), emva.MinDarkVariance)
	gain := s.gain
	if s.lit && gain == 0 {
		gain = s.typicalGain(tiles)
	}
	for i, t := range tiles {
		out[i] = typical
		if s.lit {
			out[i] = max(s.dark.VarianceDN2, emva.MinDarkVariance) + gain*max(t.mean-s.dark.MeanDN, 0)
		}
	}
	return out
}

func (s scene) typicalGain(tiles []tile) float64 {
	brightest := 0.0
	for _, t := range tiles {
		brightest = max(brightest, t.mean-s.dark.MeanDN)
	}
	var gains []float64
	for _, t := range tiles {
		if x := t.mean - s.dark.MeanDN; x > brightTileShare*brightest {
			gains = append(gains, (t.variance-s.dark.VarianceDN2)/x)
		}
	}
	return max(median(gains), 0)
}

// checkWhite refuses a pair whose difference has structure: the noise of neighbouring
// pixels is independent, a moved texture is not.
func (s scene) checkWhite(a, b []uint16, width int) error {
	across, down := neighbourCorrelation(a, b, width)
	height := len(a) / width
	limitAcross, limitDown := correlationLimit(len(a)-height), correlationLimit(len(a)-width)
	if math.Abs(across) > limitAcross || math.Abs(down) > limitDown {
		return fmt.Errorf("difference is not pixel noise (correlation of neighbours %.2f across, %.2f down, want within ±%.2f, ±%.2f): "+
			"the target moved, or the camera smooths, sharpens or compresses; fix the target, switch such processing off, and take the folder again",
			across, down, limitAcross, limitDown)
	}
	return nil
}

func correlationLimit(pairs int) float64 {
	return max(maxCorrelation, correlationScale/math.Sqrt(float64(max(pairs, 1))))
}

func neighbourCorrelation(a, b []uint16, width int) (across, down float64) {
	d := make([]float64, len(a))
	for i := range a {
		d[i] = float64(b[i]) - float64(a[i])
	}
	mean, sd := meanAndSD(d)
	if sd == 0 {
		return 0, 0
	}
	var sx, sy, nx, ny float64
	for i, v := range d {
		if i%width != 0 {
			sx += (v - mean) * (d[i-1] - mean)
			nx++
		}
		if i >= width {
			sy += (v - mean) * (d[i-width] - mean)
			ny++
		}
	}
	return sx / max(nx, 1) / (sd * sd), sy / max(ny, 1) / (sd * sd)
}
