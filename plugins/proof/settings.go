package proof

import (
	"fmt"

	"lapgate/pipeline"
)

// Settings of the stage.
type Settings struct {
	// PatchXPx, PatchYPx, PatchWidthPx and PatchHeightPx are the reference patch in the
	// frame, in px. Width 0: the patch that the calibration knows; where it knows none,
	// light is not proven by a patch.
	PatchXPx      int `json:"patch_x_px" yaml:"patch_x_px"`
	PatchYPx      int `json:"patch_y_px" yaml:"patch_y_px"`
	PatchWidthPx  int `json:"patch_width_px" yaml:"patch_width_px"`
	PatchHeightPx int `json:"patch_height_px" yaml:"patch_height_px"`
	// PhotodiodeTag names the header's tag that holds a photodiode's value. Empty: none.
	PhotodiodeTag string `json:"photodiode_tag" yaml:"photodiode_tag"`
	// PhotodiodeNominal is that value when the calibration was made; above 0 with a tag.
	PhotodiodeNominal float64 `json:"photodiode_nominal" yaml:"photodiode_nominal"`
	// MinLight and MaxLight are the allowed light relative to the calibration.
	MinLight float64 `json:"min_light" yaml:"min_light"`
	MaxLight float64 `json:"max_light" yaml:"max_light"`
	// LightTag names the header's tag that says which light was on; it must be the
	// calibration's. Empty: not compared.
	LightTag string `json:"light_tag" yaml:"light_tag"`
	// BlockPx is the side of the blocks that must not be of one value, in px. 0: blocks are
	// not looked at. Blocks at the top of the range are saturated, which is held elsewhere.
	BlockPx int `json:"block_px" yaml:"block_px"`
	// RepeatFrames is how many earlier frames of a station a frame must differ from. 0: none.
	RepeatFrames int `json:"repeat_frames" yaml:"repeat_frames"`
	// CounterStep is by how much the camera's frame counter goes up from one frame of this
	// view to the next. 0: gaps are not looked for, as where a station's units are
	// inspected at the same time and may overtake each other.
	CounterStep int `json:"counter_step" yaml:"counter_step"`
	// MinPatternShare is the share of the calibration's hot pixels, 0 to 1, that must stand
	// out where they should. 0: not proven. With fewer than 8 hot pixels it never is.
	MinPatternShare float64 `json:"min_pattern_share" yaml:"min_pattern_share"`
}

// Default allows a tenth and a half more or less light, compares with 256 frames and wants
// 6 of 10 hot pixels in place.
var Default = Settings{MinLight: 0.85, MaxLight: 1.15, BlockPx: 16, RepeatFrames: 256, MinPatternShare: 0.6}

const (
	maxSidePx  = 1 << 16
	maxRepeats = 1 << 14
)

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	for _, n := range []struct {
		key       string
		got, high int
	}{{"patch_x_px", s.PatchXPx, maxSidePx}, {"patch_y_px", s.PatchYPx, maxSidePx}, {"patch_width_px", s.PatchWidthPx, maxSidePx},
		{"patch_height_px", s.PatchHeightPx, maxSidePx}, {"block_px", s.BlockPx, 1024}, {"repeat_frames", s.RepeatFrames, maxRepeats},
		{"counter_step", s.CounterStep, 1 << 20}} {
		if n.got < 0 || n.got > n.high {
			return fmt.Errorf("%s: got %d, want 0 to %d", n.key, n.got, n.high)
		}
	}
	switch {
	case (s.PatchWidthPx > 0) != (s.PatchHeightPx > 0):
		return fmt.Errorf("patch_height_px: got %d × %d px, want both above 0 or none", s.PatchWidthPx, s.PatchHeightPx)
	case s.BlockPx > 0 && s.BlockPx < 4:
		return fmt.Errorf("block_px: got %d, want 0 or 4 to 1024: smaller ones are of one value by chance", s.BlockPx)
	case !(s.MinLight > 0 && s.MinLight <= 1):
		return fmt.Errorf("min_light: got %g, want above 0 and at most 1", s.MinLight)
	case !(s.MaxLight >= 1 && s.MaxLight <= 100):
		return fmt.Errorf("max_light: got %g, want 1 to 100", s.MaxLight)
	case s.PhotodiodeTag != "" && !(s.PhotodiodeNominal > 0 && s.PhotodiodeNominal <= 1e9):
		return fmt.Errorf("photodiode_nominal: got %g, want above 0 for photodiode_tag %q", s.PhotodiodeNominal, s.PhotodiodeTag)
	case !(s.MinPatternShare >= 0 && s.MinPatternShare <= 1):
		return fmt.Errorf("min_pattern_share: got %g, want 0 to 1", s.MinPatternShare)
	}
	return nil
}

// box returns the patch of the settings or the calibration's; false where there is none.
func (s Settings) box(c *pipeline.Calibration) (pipeline.Box, bool) {
	if s.PatchWidthPx > 0 {
		return pipeline.Box{X0: s.PatchXPx, Y0: s.PatchYPx, X1: s.PatchXPx + s.PatchWidthPx, Y1: s.PatchYPx + s.PatchHeightPx}, true
	}
	if c != nil && c.Reference != nil {
		return c.Reference.Box, true
	}
	return pipeline.Box{}, false
}
