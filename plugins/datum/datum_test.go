package datum

import (
	"context"
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
)

// run finds part and angle in the silhouette, whose geometry is turned as the scene's is.
func run(t *testing.T, r *stagetest.Rendered, u render.Unit, change func(*Settings)) *pipeline.Item {
	t.Helper()
	scene := r.Scene().Views[2]
	v, env := r.Item(&u, scene.Name), r.Env(scene.Name)
	env.Geometry = pipeline.Planar{UMPerPx: r.Scene().Camera.UMPerPx, RotationDeg: scene.RotationDeg, Mirror: scene.Mirror}
	v.Geometry = env.Geometry
	found, _, err := region.Factory.New(func(dst any) error {
		s := dst.(*region.Settings)
		s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity = region.FoundCircle, 6, 0.2, "dark"
		return nil
	}, env)
	if err != nil {
		t.Fatal(err)
	}
	if err := found.Run(context.Background(), v); err != nil {
		t.Fatal(err)
	}
	st, _, err := Factory.New(func(dst any) error {
		s := dst.(*Settings)
		s.View, s.WidthMM = scene.Name, 0.5
		if change != nil {
			change(s)
		}
		return nil
	}, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	item := &pipeline.Item{Views: []*pipeline.Item{v}}
	for _, o := range u.Objects {
		item.Defects = append(item.Defects, pipeline.Defect{Place: pipeline.Place{UUM: o.UUM, VUM: o.VUM}})
	}
	if err := st.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	return item
}

func notched(depthUM float64, view func(*render.View)) render.Scene {
	s := stagetest.SmallScene()
	s.Part.Notch = render.Notch{DepthUM: depthUM, WidthUM: 600}
	if view != nil {
		view(&s.Views[2])
	}
	return s
}

// The angle of a notch is found within 0.1° however the part lies, also in a view that is
// turned and mirrored, and defects come out where they are on the part.
func TestAngleOfTheNotch(t *testing.T) {
	for name, view := range map[string]func(*render.View){"straight": nil, "turned and mirrored": func(v *render.View) { v.RotationDeg, v.Mirror = 40, true }} {
		s := notched(400, view)
		r := stagetest.Render(t, s)
		worst := 0.
		for i := range 10 {
			u := r.Unit(i)
			u.Add(render.Object{Kind: pipeline.Dig, UUM: 1200, VUM: -500, DiameterUM: 80, BrightnessDN: 60})
			item := run(t, r, u, nil)
			got, ok := item.Number("part_angle_deg")
			if !ok {
				t.Errorf("%s, unit %d: no angle", name, i)
				continue
			}
			worst = max(worst, math.Abs(math.Mod(got-u.PartAngleDeg+540, 360)-180))
			d, o := item.Defects[0], u.Objects[0]
			if !d.PartAngleKnown || math.Hypot(d.PartUUM-o.PartUUM, d.PartVUM-o.PartVUM) > 5 {
				t.Errorf("%s, unit %d: place (%.1f, %.1f) µm on the part, want (%.1f, %.1f)", name, i, d.PartUUM, d.PartVUM, o.PartUUM, o.PartVUM)
			}
		}
		t.Logf("%s: off by %.3f° at most", name, worst)
		if worst > 0.1 {
			t.Errorf("%s: off by %.3f°, want at most 0.1", name, worst)
		}
	}
}

// Without a mark, or with two alike, the angle is unknown.
func TestUnknownAngle(t *testing.T) {
	plain := stagetest.Render(t, stagetest.SmallScene())
	u := plain.Unit(0)
	u.Add(render.Object{Kind: pipeline.Dig, UUM: 1200, DiameterUM: 80, BrightnessDN: 60})
	item := run(t, plain, u, nil)
	if _, ok := item.Number("part_angle_deg"); ok || item.Defects[0].PartAngleKnown {
		t.Error("a part without a mark has an angle")
	}
	r := stagetest.Render(t, notched(400, nil))
	two := r.Unit(0)
	sin, cos := math.Sincos((two.PartAngleDeg + 130) * math.Pi / 180)
	two.Add(render.Object{Kind: pipeline.EdgeChip, UUM: 3000 * cos, VUM: 3000 * sin, WidthUM: 420, LengthUM: 620})
	if _, ok := run(t, r, two, nil).Number("part_angle_deg"); ok {
		t.Error("a part with two marks alike has an angle")
	}
}

// The mark's own place on the part counts from +u.
func TestMarkDeg(t *testing.T) {
	r := stagetest.Render(t, notched(400, nil))
	u := r.Unit(1)
	a, _ := run(t, r, u, nil).Number("part_angle_deg")
	b, _ := run(t, r, u, func(s *Settings) { s.MarkDeg = 90 }).Number("part_angle_deg")
	if d := math.Mod(a-b+360, 360); math.Abs(d-90) > 1e-9 {
		t.Errorf("turned by %g°, want 90", d)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"polarity": func(s *Settings) { s.Polarity = "rim" }, "width_mm": func(s *Settings) { s.WidthMM = 0 }, "mark_deg": func(s *Settings) { s.MarkDeg = 400 },
		"outer_diameter_mm": func(s *Settings) { s.InnerDiameterMM, s.OuterDiameterMM = 5, 4 }, "min_sigma": func(s *Settings) { s.MinSigma = 0 }, "min_lead": func(s *Settings) { s.MinLead = 0 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
