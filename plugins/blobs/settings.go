package blobs

import (
	"fmt"

	"lapgate/pipeline"
)

// Settings of the stage.
type Settings struct {
	// KLow is the threshold, in sigmas of the snr plane, above which pixels belong to a
	// blob; above 0.
	KLow float64 `json:"k_low" yaml:"k_low"`
	// KHigh is the threshold, in sigmas, that a blob must reach somewhere; at least k_low.
	KHigh float64 `json:"k_high" yaml:"k_high"`
	// MinAreaPx is the smallest number of pixels above k_low that makes a defect. 0 and 1:
	// any.
	MinAreaPx int `json:"min_area_px" yaml:"min_area_px"`
	// ScratchRatio is the length over width, at half height, from which a blob is called a
	// scratch; at least 1.
	ScratchRatio float64 `json:"scratch_ratio" yaml:"scratch_ratio"`
	// ScratchMinLengthPx is the shortest blob, in px, that is called a scratch. 0: any.
	ScratchMinLengthPx float64 `json:"scratch_min_length_px" yaml:"scratch_min_length_px"`
}

// Default: of white noise alone about one frame of 2 million pixels in 1 000 reaches 6
// sigmas (2·10⁶ × 1·10⁻⁹, and neighbours come together).
var Default = Settings{KLow: 3.5, KHigh: 6, MinAreaPx: 1, ScratchRatio: 4}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case !(s.KHigh >= 1 && s.KHigh <= 1e6):
		return fmt.Errorf("k_high: got %g, want 1 to 1000000", s.KHigh)
	case !(s.KLow >= 1 && s.KLow <= s.KHigh):
		return fmt.Errorf("k_low: got %g, want 1 to k_high (%g)", s.KLow, s.KHigh)
	case s.MinAreaPx < 0 || s.MinAreaPx > 1<<20:
		return fmt.Errorf("min_area_px: got %d, want 0 to %d", s.MinAreaPx, 1<<20)
	case !(s.ScratchRatio >= 1 && s.ScratchRatio <= 1000):
		return fmt.Errorf("scratch_ratio: got %g, want 1 to 1000", s.ScratchRatio)
	case !(s.ScratchMinLengthPx >= 0 && s.ScratchMinLengthPx <= 1e6):
		return fmt.Errorf("scratch_min_length_px: got %g, want 0 to 1000000", s.ScratchMinLengthPx)
	}
	return nil
}

func (s Settings) kind(lengthPx, widthPx float64) pipeline.Kind {
	if lengthPx >= s.ScratchRatio*widthPx && lengthPx >= s.ScratchMinLengthPx {
		return pipeline.Scratch
	}
	return pipeline.Dig
}
