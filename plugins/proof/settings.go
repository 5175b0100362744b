package proof

import (
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/drift"
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
	// Light is the light relative to the calibration: hold_below, warn_below, warn_above and
	// hold_above. All 0: light is not proven by measure.
	Light drift.Bounds `json:"light" yaml:"light"`
	// LightTag names the header's tag that says which light was on; it must be the
	// calibration's. Empty: not compared.
	LightTag string `json:"light_tag" yaml:"light_tag"`
	// BlockPx is the side of the blocks that must not be of one value, in px. 0: blocks are
	// not looked at. Blocks at the top of the range are saturated, which is held elsewhere.
	BlockPx int `json:"block_px" yaml:"block_px"`
	// RepeatFrames is how many earlier frames of a station and view a frame must differ from;
	// after a start the server gives those on record. 0: none.
	RepeatFrames int `json:"repeat_frames" yaml:"repeat_frames"`
	// CounterStep is by how much the camera's frame counter goes up from one frame of this
	// view to the next. 0: gaps are not looked for, as where a station's units are
	// inspected at the same time and may overtake each other.
	CounterStep int `json:"counter_step" yaml:"counter_step"`
	// Pattern is how much of the sensor's own pattern stands where the calibration has it, 1
	// = all, with the same four bounds. All 0: not proven. Where the pattern is too faint to be
	// told in the view's light it never is.
	Pattern drift.Bounds `json:"pattern" yaml:"pattern"`
}

// Default warns at a twentieth and holds at 15 % of light lost or gained, and compares with
// 256 frames.
var Default = Settings{Light: drift.LightBounds(), BlockPx: 16, RepeatFrames: 256, Pattern: drift.PatternBounds()}

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
	case s.PhotodiodeTag != "" && !(s.PhotodiodeNominal > 0 && s.PhotodiodeNominal <= 1e9):
		return fmt.Errorf("photodiode_nominal: got %g, want above 0 for photodiode_tag %q", s.PhotodiodeNominal, s.PhotodiodeTag)
	case s.PhotodiodeTag != "" && s.Light.Off():
		return fmt.Errorf("light: got no bounds, want some for photodiode_tag %q", s.PhotodiodeTag)
	}
	if err := s.Light.Check("light"); err != nil {
		return err
	}
	return s.Pattern.Check("pattern")
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
