package unwrap

import (
	"fmt"

	"lapgate/pipeline"
)

// Settings of the stage.
type Settings struct {
	// CentreXPx and CentreYPx are the ring's centre. Both 0: the middle of the frame.
	CentreXPx float64 `json:"centre_x_px"`
	CentreYPx float64 `json:"centre_y_px"`
	// InnerRadiusPx and OuterRadiusPx are the ring's edges; above 0, the outer larger.
	InnerRadiusPx float64 `json:"inner_radius_px"`
	OuterRadiusPx float64 `json:"outer_radius_px"`
	// InnerDiameterMM and OuterDiameterMM are the part's diameters at those edges: equal
	// for a cylinder; above 0.
	InnerDiameterMM float64 `json:"inner_diameter_mm"`
	OuterDiameterMM float64 `json:"outer_diameter_mm"`
	// HeightMM is the part's height from edge to edge, along its axis. 0: a flat ring.
	HeightMM float64 `json:"height_mm"`
	// GridPx is the side of the cells in which level and noise are measured, on the flat
	// picture; 8 to 512.
	GridPx int `json:"grid_px"`
	// KLow and KHigh are the two thresholds in sigmas, as in the stage blobs.
	KLow  float64 `json:"k_low"`
	KHigh float64 `json:"k_high"`
	// ScratchRatio is the length over width from which a defect is called a scratch.
	ScratchRatio float64 `json:"scratch_ratio"`
	// Polarity is bright, dark or both.
	Polarity string `json:"polarity"`
}

// Default is a bore of 20 mm, 10 mm deep, between 150 and 350 px from the middle.
var Default = Settings{InnerRadiusPx: 150, OuterRadiusPx: 350, InnerDiameterMM: 20, OuterDiameterMM: 20, HeightMM: 10,
	GridPx: 64, KLow: 3.5, KHigh: 6, ScratchRatio: 4, Polarity: "bright"}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	within := func(v, low, high float64) bool { return v >= low && v <= high } // false for NaN
	switch {
	case !within(s.CentreXPx, 0, 1e5):
		return fmt.Errorf("centre_x_px: got %g, want 0 to 100000", s.CentreXPx)
	case !within(s.CentreYPx, 0, 1e5):
		return fmt.Errorf("centre_y_px: got %g, want 0 to 100000", s.CentreYPx)
	case !within(s.InnerRadiusPx, 1, 1e5):
		return fmt.Errorf("inner_radius_px: got %g, want 1 to 100000", s.InnerRadiusPx)
	case !within(s.OuterRadiusPx, s.InnerRadiusPx+1, 1e5):
		return fmt.Errorf("outer_radius_px: got %g, want more than inner_radius_px (%g) by 1 or more", s.OuterRadiusPx, s.InnerRadiusPx)
	case !within(s.InnerDiameterMM, 1e-3, 1e5):
		return fmt.Errorf("inner_diameter_mm: got %g, want 0.001 to 100000", s.InnerDiameterMM)
	case !within(s.OuterDiameterMM, 1e-3, 1e5):
		return fmt.Errorf("outer_diameter_mm: got %g, want 0.001 to 100000", s.OuterDiameterMM)
	case !within(s.HeightMM, 0, 1e5):
		return fmt.Errorf("height_mm: got %g, want 0 to 100000", s.HeightMM)
	case s.HeightMM == 0 && s.InnerDiameterMM == s.OuterDiameterMM:
		return fmt.Errorf("height_mm: got 0 with equal diameters, want a surface that has an area")
	case s.GridPx < 8 || s.GridPx > 512:
		return fmt.Errorf("grid_px: got %d, want 8 to 512", s.GridPx)
	case !within(s.KHigh, 1, 1e6):
		return fmt.Errorf("k_high: got %g, want 1 to 1000000", s.KHigh)
	case !within(s.KLow, 1, s.KHigh):
		return fmt.Errorf("k_low: got %g, want 1 to k_high (%g)", s.KLow, s.KHigh)
	case !within(s.ScratchRatio, 1, 1000):
		return fmt.Errorf("scratch_ratio: got %g, want 1 to 1000", s.ScratchRatio)
	case s.Polarity != "bright" && s.Polarity != "dark" && s.Polarity != "both":
		return fmt.Errorf("polarity: got %q, want bright, dark or both", s.Polarity)
	}
	return nil
}

// Factory describes the stage.
func Factory() pipeline.Factory {
	return pipeline.Make(pipeline.Factory{
		Type: "unwrap", Version: "2", Scope: pipeline.ScopeView,
		Summary: "Lays the ring view of a bore, rim or cone out flat, height over angle, and measures its defects in µm on that surface.",
		Reads:   []string{pipeline.RawPlane},
		Writes:  []string{"region", "geometry", "defects", "coverage", FlatPlane, FlatSNRPlane, "measurements"},
	}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })
}
