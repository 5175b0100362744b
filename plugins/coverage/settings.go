package coverage

import "fmt"

// Settings of the stage.
type Settings struct {
	// SmallestDigUM is the diameter of the smallest dig that the limits forbid, in µm. 0:
	// digs are not asked for.
	SmallestDigUM float64 `json:"smallest_dig_um" yaml:"smallest_dig_um"`
	// DigContrastDN is how much the faintest such dig stands out in the corrected picture
	// before blur, in DN. 0: the calibration's sizing curve, which must then be there.
	DigContrastDN float64 `json:"dig_contrast_dn" yaml:"dig_contrast_dn"`
	// ScratchWidthUM is the width of the faintest scratch that the limits forbid, in µm. 0:
	// scratches are not asked for.
	ScratchWidthUM float64 `json:"scratch_width_um" yaml:"scratch_width_um"`
	// ScratchContrastDN is how much it stands out before blur, in corrected DN.
	ScratchContrastDN float64 `json:"scratch_contrast_dn" yaml:"scratch_contrast_dn"`
	// KHigh is the threshold that a defect must reach, in sigmas: that of the stage blobs.
	KHigh float64 `json:"k_high" yaml:"k_high"`
	// BlurPx is the sigma of the point spread, in px. 0: the calibration's, else 0.8.
	BlurPx float64 `json:"blur_px" yaml:"blur_px"`
	// Margin is how much larger than what is found every second time the forbidden must be
	// for its cell to count as inspected; at least 1. At 1.3 it is found in 9 of 10 cases.
	Margin float64 `json:"margin" yaml:"margin"`
}

// Default asks for nothing: the share is then that of the cells whose level and noise
// were measured.
var Default = Settings{KHigh: 6, Margin: 1.3}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	for _, n := range []struct {
		key     string
		v, high float64
	}{{"smallest_dig_um", s.SmallestDigUM, 1e6}, {"dig_contrast_dn", s.DigContrastDN, 1e6}, {"scratch_width_um", s.ScratchWidthUM, 1e6},
		{"scratch_contrast_dn", s.ScratchContrastDN, 1e6}, {"blur_px", s.BlurPx, 50}} {
		if !(n.v >= 0 && n.v <= n.high) {
			return fmt.Errorf("%s: got %g, want 0 to %g", n.key, n.v, n.high)
		}
	}
	switch {
	case !(s.KHigh >= 1 && s.KHigh <= 1e6):
		return fmt.Errorf("k_high: got %g, want 1 to 1000000, that of the stage blobs", s.KHigh)
	case !(s.Margin >= 1 && s.Margin <= 10):
		return fmt.Errorf("margin: got %g, want 1 to 10", s.Margin)
	case s.ScratchWidthUM > 0 && s.ScratchContrastDN == 0:
		return fmt.Errorf("scratch_contrast_dn: not given, want the contrast of a scratch of scratch_width_um (%g)", s.ScratchWidthUM)
	}
	return nil
}
