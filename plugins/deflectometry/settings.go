package deflectometry

import (
	"fmt"

	"lapgate/pipeline"
)

// Settings of the stage.
type Settings struct {
	// Steps is N, how many evenly shifted frames make one phase; 3 to 32.
	Steps int `json:"steps"`
	// PeriodsMM are the fringe periods on the screen, from the coarsest, which must be
	// longer than all of the screen that the camera sees in the part, to the finest.
	PeriodsMM []float64 `json:"periods_mm"`
	// BothDirections says that all frames of vertical fringes (phase grows with the screen's
	// x) are followed by as many of horizontal ones. false: vertical fringes alone.
	BothDirections bool `json:"both_directions"`
	// DistanceMM is from the part to the screen; above 0.
	DistanceMM float64 `json:"distance_mm"`
	// DisplayGamma is the exponent of the display. 1: it was linearised already.
	DisplayGamma float64 `json:"display_gamma"`
	// MinModulationDN is the smallest B of a pixel that counts as inspected; above 0.
	MinModulationDN float64 `json:"min_modulation_dn"`
	// MaxSlopeMrad is the slope, against the part's own form, above which a place is a
	// defect: a dent, or waviness where the slope turns five times or more. It must be five
	// times the noise of one pixel's slope, or the view is held. 0: no place is a defect.
	MaxSlopeMrad float64 `json:"max_slope_mrad"`
	// MinAreaPx is the smallest number of pixels so steep that makes a defect.
	MinAreaPx int `json:"min_area_px"`
}

// Default is four steps of two periods in both directions: 16 frames.
var Default = Settings{Steps: 4, PeriodsMM: []float64{320, 20}, BothDirections: true, DistanceMM: 500, DisplayGamma: 1,
	MinModulationDN: 10, MaxSlopeMrad: 1, MinAreaPx: 20}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	within := func(v, low, high float64) bool { return v >= low && v <= high } // false for NaN
	for i, p := range s.PeriodsMM {
		if !within(p, 1e-3, 1e5) || i > 0 && p >= s.PeriodsMM[i-1] {
			return fmt.Errorf("periods_mm[%d]: got %g, want above 0 and finer than the one before", i, p)
		}
		if i > 0 && s.PeriodsMM[i-1] > 64*p {
			return fmt.Errorf("periods_mm[%d]: got %g, want at least a 64th of the one before (%g): noise would decide the fringe order", i, p, s.PeriodsMM[i-1])
		}
	}
	switch {
	case s.Steps < 3 || s.Steps > 32:
		return fmt.Errorf("steps: got %d, want 3 to 32", s.Steps)
	case len(s.PeriodsMM) == 0:
		return fmt.Errorf("periods_mm: got none, want at least one")
	case s.Frames() > pipeline.MaxViewFrames:
		return fmt.Errorf("periods_mm: got %d frames in all, want at most %d in a view", s.Frames(), pipeline.MaxViewFrames)
	case !within(s.DistanceMM, 1e-3, 1e6):
		return fmt.Errorf("distance_mm: got %g, want 0.001 to 1000000", s.DistanceMM)
	case !within(s.DisplayGamma, 0.2, 5):
		return fmt.Errorf("display_gamma: got %g, want 0.2 to 5", s.DisplayGamma)
	case !within(s.MinModulationDN, 1e-3, 65535):
		return fmt.Errorf("min_modulation_dn: got %g, want 0.001 to 65535", s.MinModulationDN)
	case !within(s.MaxSlopeMrad, 0, 1000):
		return fmt.Errorf("max_slope_mrad: got %g, want 0 (none) to 1000", s.MaxSlopeMrad)
	case s.MinAreaPx < 1:
		return fmt.Errorf("min_area_px: got %d, want 1 or more", s.MinAreaPx)
	}
	return nil
}

// Frames returns how many frames the view must have.
func (s Settings) Frames() int {
	n := s.Steps * len(s.PeriodsMM)
	if s.BothDirections {
		n *= 2
	}
	return n
}

// Factory describes the stage.
func Factory() pipeline.Factory {
	return pipeline.Make(pipeline.Factory{
		Type: "deflectometry", Version: "2", Scope: pipeline.ScopeView,
		Summary: "Takes slopes and curvature of a mirror from phase-shifted fringes, and marks shallow dents and waviness by slope.",
		Reads:   []string{pipeline.RawPlane, "region"},
		Writes:  []string{SlopeXPlane, SlopeYPlane, CurvaturePlane, "defects", "coverage", "measurements"},
	}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })
}
