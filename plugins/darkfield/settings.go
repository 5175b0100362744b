package darkfield

import "fmt"

// The polarities of defects.
const (
	Bright = "bright"
	Dark   = "dark"
	Both   = "both"
)

// Settings of the stage.
type Settings struct {
	// GridPx is the side, in px, of the cells in which level and noise are measured. A
	// defect wider than about two thirds of it becomes background.
	GridPx int `json:"grid_px" yaml:"grid_px"`
	// Polarity says which defects the snr plane shows as positive: bright (brighter than
	// their surroundings), dark, or both (the plane is then the magnitude).
	Polarity string `json:"polarity" yaml:"polarity"`
	// MaxBackgroundDN is the highest level, in corrected DN, that any cell may have. 0: none.
	MaxBackgroundDN float64 `json:"max_background_dn" yaml:"max_background_dn"`
	// MaxNoiseDN is the highest noise of one pixel, in corrected DN, that any cell may
	// have. 0: none.
	MaxNoiseDN float64 `json:"max_noise_dn" yaml:"max_noise_dn"`
}

// Default is a grid of 64 px, bright defects, no absolute bounds.
var Default = Settings{GridPx: 64, Polarity: Bright}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case s.GridPx < 16 || s.GridPx > 1024:
		return fmt.Errorf("grid_px: got %d, want 16 to 1024", s.GridPx)
	case s.Polarity != Bright && s.Polarity != Dark && s.Polarity != Both:
		return fmt.Errorf("polarity: got %q, want bright, dark or both", s.Polarity)
	case !(s.MaxBackgroundDN >= 0 && s.MaxBackgroundDN <= 1e6):
		return fmt.Errorf("max_background_dn: got %g, want 0 (none) to 1000000", s.MaxBackgroundDN)
	case !(s.MaxNoiseDN >= 0 && s.MaxNoiseDN <= 1e6):
		return fmt.Errorf("max_noise_dn: got %g, want 0 (none) to 1000000", s.MaxNoiseDN)
	}
	return nil
}
