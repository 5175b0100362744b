package datum

import (
	"context"
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Settings of the stage.
type Settings struct {
	// View is the view that shows the mark. Empty: the first.
	View string `json:"view" yaml:"view"`
	// InnerDiameterMM and OuterDiameterMM are the ring about the part's centre in which the
	// mark lies, in mm. Both 0: from 0.9 to 0.98 of the diameter found.
	InnerDiameterMM float64 `json:"inner_diameter_mm" yaml:"inner_diameter_mm"`
	OuterDiameterMM float64 `json:"outer_diameter_mm" yaml:"outer_diameter_mm"`
	// WidthMM is how far the mark goes along the ring, in mm; above 0.
	WidthMM float64 `json:"width_mm" yaml:"width_mm"`
	// Polarity is bright where the mark is brighter than the rest of the ring, or dark. A
	// notch in a silhouette is bright.
	Polarity string `json:"polarity" yaml:"polarity"`
	// MarkDeg is where the mark is on the part, from the part's +u towards +v.
	MarkDeg float64 `json:"mark_deg" yaml:"mark_deg"`
	// MinSigma is by how many robust spreads of the ring the mark must stand out.
	MinSigma float64 `json:"min_sigma" yaml:"min_sigma"`
	// MinLead is how much higher than the next best place it must be, as a ratio from 1.
	MinLead float64 `json:"min_lead" yaml:"min_lead"`
}

// Default is a bright mark of 0.5 mm that stands out by 8 spreads and leads by half.
var Default = Settings{WidthMM: 0.5, Polarity: "bright", MinSigma: 8, MinLead: 1.5}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case s.Polarity != "bright" && s.Polarity != "dark":
		return fmt.Errorf("polarity: got %q, want bright or dark", s.Polarity)
	case !(s.WidthMM > 0 && s.WidthMM <= 1e4):
		return fmt.Errorf("width_mm: got %g, want above 0 and at most 10000", s.WidthMM)
	case !(s.InnerDiameterMM >= 0 && s.OuterDiameterMM <= 1e4) || (s.OuterDiameterMM > 0 || s.InnerDiameterMM > 0) && !(s.OuterDiameterMM > s.InnerDiameterMM):
		return fmt.Errorf("outer_diameter_mm: got %g to %g mm, want a ring, or 0 for both", s.InnerDiameterMM, s.OuterDiameterMM)
	case !(math.Abs(s.MarkDeg) <= 360):
		return fmt.Errorf("mark_deg: got %g, want -360 to 360", s.MarkDeg)
	case !(s.MinSigma >= 1 && s.MinSigma <= 1e6):
		return fmt.Errorf("min_sigma: got %g, want 1 to 1000000", s.MinSigma)
	case !(s.MinLead >= 1 && s.MinLead <= 1000):
		return fmt.Errorf("min_lead: got %g, want 1 to 1000", s.MinLead)
	}
	return nil
}

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "datum", Version: "1", Scope: pipeline.ScopeUnit,
	Summary: "Finds the part's angle by a mark and gives every defect its place on the part.",
	Reads:   []string{pipeline.RawPlane, "region", "geometry", "defects"},
	Writes:  []string{"defects", "measurements"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// Run implements pipeline.Stage.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	view, err := st.view(item)
	if err != nil {
		return err
	}
	angle, known, err := st.angle(item, view)
	if err != nil {
		return err
	}
	out := make([]pipeline.Defect, 0, len(item.Defects))
	for _, d := range item.Defects {
		d.PartUUM, d.PartVUM, d.PartAngleKnown = 0, 0, known
		if known {
			sin, cos := math.Sincos(angle * math.Pi / 180)
			d.PartUUM, d.PartVUM = cos*d.UUM+sin*d.VUM, cos*d.VUM-sin*d.UUM
		}
		out = append(out, d)
	}
	item.Defects = out
	if known {
		item.Measure(pipeline.MeasuredPartAngle, angle, "deg")
	}
	return ctx.Err()
}

func (st stage) view(item *pipeline.Item) (*pipeline.Item, error) {
	for _, v := range item.Views {
		if st.s.View == "" || v.View == st.s.View {
			return v, nil
		}
	}
	if len(item.Views) == 0 || st.s.View == "" {
		return nil, pipeline.Invalid("the unit has no view to look for the datum mark in")
	}
	return nil, nil // the view did not come: the unit is held for that, and the angle is unknown
}

// angle returns by how much the part lies turned, from u towards v, 0 to 360.
func (st stage) angle(item, view *pipeline.Item) (float64, bool, error) {
	if view == nil || view.Region == nil || view.Geometry == nil || view.Region.RadiusPx < 2 {
		return 0, false, nil
	}
	raw, err := view.Raw()
	if err != nil {
		return 0, false, err
	}
	r := view.Region
	_, _, scale := view.Geometry.ToStation(r.CentreX, r.CentreY)
	r0, r1 := 0.9*r.RadiusPx, 0.98*r.RadiusPx
	if st.s.OuterDiameterMM > 0 {
		r0, r1 = st.s.InnerDiameterMM*500/scale, st.s.OuterDiameterMM*500/scale
	}
	n := int(math.Ceil(2 * math.Pi * r1))
	profile, ok := raster.RingProfile(raw, r.CentreX, r.CentreY, r0, r1, n)
	if !ok {
		return 0, false, nil
	}
	if st.s.Polarity == "dark" {
		for i := range profile {
			profile[i] = -profile[i]
		}
	}
	// The mark is as many samples wide as its chord at the ring's outside.
	mark, ok := raster.FindMark(profile, int(math.Round(st.s.WidthMM*1000/scale/r1*float64(n)/(2*math.Pi))))
	if !ok {
		return 0, false, nil
	}
	item.Measure("datum_sigma", mark.Sigma, "sigma")
	if mark.Sigma < st.s.MinSigma || mark.Lead < st.s.MinLead {
		return 0, false, nil
	}
	sin, cos := math.Sincos(2 * math.Pi * mark.At / float64(n))
	u, v, _ := view.Geometry.ToStation(r.CentreX+r1*cos, r.CentreY+r1*sin)
	return math.Mod(math.Atan2(v, u)*180/math.Pi-st.s.MarkDeg+720, 360), true, nil
}
