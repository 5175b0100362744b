package region

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"lapgate/pipeline/drift"
)

// The ways to say where the part is.
const (
	FoundCircle = "found_circle" // a round part, found in every frame
	FoundArea   = "found_area"   // a part of any outline on dark surroundings, found in every frame
	Circle      = "circle"       // a circle that is always in the same place
	Polygon     = "polygon"
	MaskImage   = "mask"
	WholeFrame  = "frame"
)

// Shapes lists the ways in a fixed order.
func Shapes() []string {
	return []string{FoundCircle, FoundArea, Circle, Polygon, MaskImage, WholeFrame}
}

// Settings say where on the frame limits hold.
type Settings struct {
	// Shape is found_circle, found_area, circle, polygon, mask or frame.
	Shape string `json:"shape" yaml:"shape"`
	// DiameterMM is the part's diameter in mm, for both circles; it must be above 0.
	DiameterMM float64 `json:"diameter_mm" yaml:"diameter_mm"`
	// DiameterToleranceMM is how much the diameter found may differ from diameter_mm, in
	// mm; for found_circle it must be above 0.
	DiameterToleranceMM float64 `json:"diameter_tolerance_mm" yaml:"diameter_tolerance_mm"`
	// AreaMM2 is the part's area in mm² for found_area, where it must be above 0.
	AreaMM2 float64 `json:"area_mm2" yaml:"area_mm2"`
	// AreaToleranceMM2 is how much the area found may differ from area_mm2, in mm²; for
	// found_area it must be above 0.
	AreaToleranceMM2 float64 `json:"area_tolerance_mm2" yaml:"area_tolerance_mm2"`
	// EdgeLevel is the share of the part's level, above 0 and below 1, below which pixels
	// are surroundings, for found_area.
	EdgeLevel float64 `json:"edge_level" yaml:"edge_level"`
	// Polarity says how the part looks against its surroundings: bright, dark, or rim
	// where the outline itself is a bright line, as a chamfer is in dark field.
	Polarity string `json:"polarity" yaml:"polarity"`
	// CentreXPx and CentreYPx are the expected centre in px. Both 0: the frame's middle.
	CentreXPx float64 `json:"centre_x_px" yaml:"centre_x_px"`
	CentreYPx float64 `json:"centre_y_px" yaml:"centre_y_px"`
	// SearchPx is how far from there the centre may lie, in px. 0: a quarter of the
	// frame's shorter side.
	SearchPx float64 `json:"search_px" yaml:"search_px"`
	// MinEdgeShare is the share of directions, 0 to 1, in which the edge must be found.
	// 0: no demand beyond the 0.3 without which there is no circle.
	MinEdgeShare float64 `json:"min_edge_share" yaml:"min_edge_share"`
	// MaxEdgeRMSPx is how much the edge points may scatter about the circle, in px. 0: 1.5.
	MaxEdgeRMSPx float64 `json:"max_edge_rms_px" yaml:"max_edge_rms_px"`
	// MaxEdgeWidthPx is the largest 10–90 % width of the edge that is still in focus, in
	// px, whatever the calibration says. 0: no such bound.
	MaxEdgeWidthPx float64 `json:"max_edge_width_px" yaml:"max_edge_width_px"`
	// Focus is the width of the edge relative to that of the conforming part that the
	// calibration was made with, as the same polarity shows it: hold_below, warn_below,
	// warn_above and hold_above. All 0: not proven.
	Focus drift.Bounds `json:"focus" yaml:"focus"`
	// Scale is the diameter in px relative to that part's, with the same four bounds. They
	// must leave room for what good parts differ by. All 0: not proven.
	Scale drift.Bounds `json:"scale" yaml:"scale"`
	// NeedPartEdge has the calibration know the edge of a conforming part. false: focus and
	// scale are proven only where it does.
	NeedPartEdge bool `json:"need_part_edge" yaml:"need_part_edge"`
	// Polygon is the corners in px, in order; at least three for the polygon shape.
	Polygon []Corner `json:"polygon" yaml:"polygon"`
	// MaskFile is a PNG of the frame's size, beside the recipe: pixels that are not
	// black are in the region.
	MaskFile string `json:"mask_file" yaml:"mask_file"`
	// MaskSHA256 is the SHA-256 of that file in hexadecimal. Empty: any; the effective
	// settings then carry the one that was read, so another picture is another recipe.
	MaskSHA256 string `json:"mask_sha256" yaml:"mask_sha256"`
	// RimMM is the width of a rim, in mm, that is left out all around a circle or a
	// found area. 0: none.
	RimMM float64 `json:"rim_mm" yaml:"rim_mm"`
	// Zones are concentric parts of a circle in order of precedence. None: one zone named
	// "all". Only circles have zones.
	Zones []ZoneSettings `json:"zones" yaml:"zones"`
}

// Corner is a corner of a polygon, in px.
type Corner struct {
	XPx float64 `json:"x_px" yaml:"x_px"`
	YPx float64 `json:"y_px" yaml:"y_px"`
}

// ZoneSettings is a disc or, with an inner diameter, an annulus about the part's centre.
type ZoneSettings struct {
	// Name of the zone; the limits speak of it by this name.
	Name string `json:"name" yaml:"name"`
	// DiameterMM is the outer diameter in mm. 0: the part's, less its rim.
	DiameterMM float64 `json:"diameter_mm" yaml:"diameter_mm"`
	// InnerDiameterMM is the inner diameter in mm. 0: a disc.
	InnerDiameterMM float64 `json:"inner_diameter_mm" yaml:"inner_diameter_mm"`
}

// Default is the whole frame as one zone.
var Default = Settings{Shape: WholeFrame, Polarity: "bright", EdgeLevel: 0.5, Focus: drift.FocusBounds(), Scale: drift.ScaleBounds()}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	if !slices.Contains(Shapes(), s.Shape) {
		return fmt.Errorf("shape: got %q, want one of %s", s.Shape, strings.Join(Shapes(), ", "))
	}
	if s.Polarity != "bright" && s.Polarity != "dark" && s.Polarity != "rim" {
		return fmt.Errorf("polarity: got %q, want bright, dark or rim", s.Polarity)
	}
	if err := s.checkNumbers(); err != nil {
		return err
	}
	switch {
	case s.round() && s.DiameterMM == 0:
		return fmt.Errorf("diameter_mm: got 0, want the part's diameter for shape %s", s.Shape)
	case s.Shape == FoundCircle && (s.DiameterToleranceMM == 0 || s.DiameterToleranceMM >= s.DiameterMM):
		return fmt.Errorf("diameter_tolerance_mm: got %g, want above 0 and below diameter_mm (%g)", s.DiameterToleranceMM, s.DiameterMM)
	case s.Shape == FoundArea && s.AreaMM2 == 0:
		return fmt.Errorf("area_mm2: got 0, want the part's area for shape %s", s.Shape)
	case s.Shape == FoundArea && (s.AreaToleranceMM2 == 0 || s.AreaToleranceMM2 >= s.AreaMM2):
		return fmt.Errorf("area_tolerance_mm2: got %g, want above 0 and below area_mm2 (%g)", s.AreaToleranceMM2, s.AreaMM2)
	case s.Shape == FoundArea && s.Polarity != "bright":
		return fmt.Errorf("polarity: got %q for shape %s, want bright", s.Polarity, s.Shape)
	case !(s.EdgeLevel > 0 && s.EdgeLevel < 1):
		return fmt.Errorf("edge_level: got %g, want above 0 and below 1", s.EdgeLevel)
	case s.Shape == Polygon && len(s.Polygon) < 3:
		return fmt.Errorf("polygon: got %d corners, want at least 3", len(s.Polygon))
	case s.Shape == MaskImage && s.MaskFile == "":
		return fmt.Errorf("mask_file: not given, want the name of a PNG beside the recipe")
	case s.NeedPartEdge && s.Shape != FoundCircle:
		return fmt.Errorf("need_part_edge: got true for shape %s, want it only for %s", s.Shape, FoundCircle)
	case !s.round() && (len(s.Zones) > 0 || s.RimMM > 0 && s.Shape != FoundArea):
		return fmt.Errorf("zones: got zones or rim_mm for shape %s, want them only for %s and %s (rim_mm also for %s)", s.Shape, FoundCircle, Circle, FoundArea)
	case s.round() && 2*s.RimMM >= s.DiameterMM:
		return fmt.Errorf("rim_mm: got %g, want less than half of diameter_mm (%g)", s.RimMM, s.DiameterMM)
	}
	if err := errors.Join(s.Focus.Check("focus"), s.Scale.Check("scale")); err != nil {
		return err
	}
	return s.checkZones()
}

func (s Settings) round() bool { return s.Shape == FoundCircle || s.Shape == Circle }

// largest bounds every length, in mm and px, so that no sum overflows.
const largest = 1e6

func (s Settings) checkNumbers() error {
	numbers := []struct {
		key  string
		v    float64
		high float64
	}{
		{"diameter_mm", s.DiameterMM, largest}, {"diameter_tolerance_mm", s.DiameterToleranceMM, largest},
		{"area_mm2", s.AreaMM2, largest}, {"area_tolerance_mm2", s.AreaToleranceMM2, largest},
		{"centre_x_px", s.CentreXPx, largest}, {"centre_y_px", s.CentreYPx, largest}, {"search_px", s.SearchPx, largest},
		{"min_edge_share", s.MinEdgeShare, 1}, {"max_edge_rms_px", s.MaxEdgeRMSPx, largest},
		{"max_edge_width_px", s.MaxEdgeWidthPx, largest}, {"rim_mm", s.RimMM, largest},
	}
	for i, z := range s.Zones {
		numbers = append(numbers, struct {
			key     string
			v, high float64
		}{fmt.Sprintf("zones[%d].diameter_mm", i), z.DiameterMM, largest}, struct {
			key     string
			v, high float64
		}{fmt.Sprintf("zones[%d].inner_diameter_mm", i), z.InnerDiameterMM, largest})
	}
	for _, n := range numbers {
		if !(n.v >= 0 && n.v <= n.high) {
			return fmt.Errorf("%s: got %g, want 0 to %g", n.key, n.v, n.high)
		}
	}
	for i, c := range s.Polygon {
		if !(math.Abs(c.XPx) <= largest && math.Abs(c.YPx) <= largest) {
			return fmt.Errorf("polygon[%d]: got (%g, %g), want px up to %g", i, c.XPx, c.YPx, float64(largest))
		}
	}
	return nil
}

// maxZones is what a region can hold.
const maxZones = 255

func (s Settings) checkZones() error {
	if len(s.Zones) > maxZones {
		return fmt.Errorf("zones: got %d, want at most %d", len(s.Zones), maxZones)
	}
	names := map[string]bool{}
	usable := s.DiameterMM - 2*s.RimMM
	for i, z := range s.Zones {
		outer := z.outer(s)
		switch {
		case z.Name == "" || names[z.Name]:
			return fmt.Errorf("zones[%d].name: got %q, want a name of its own", i, z.Name)
		case outer > usable*(1+1e-9):
			return fmt.Errorf("zones[%d].diameter_mm: got %g, want at most %g, the part less its rim", i, outer, usable)
		case z.InnerDiameterMM >= outer:
			return fmt.Errorf("zones[%d].inner_diameter_mm: got %g, want less than the outer diameter (%g)", i, z.InnerDiameterMM, outer)
		}
		names[z.Name] = true
	}
	return nil
}

func (z ZoneSettings) outer(s Settings) float64 {
	if z.DiameterMM == 0 {
		return s.DiameterMM - 2*s.RimMM
	}
	return z.DiameterMM
}
