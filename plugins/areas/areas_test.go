package areas

import (
	"context"
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
)

func run(t *testing.T, r *stagetest.Rendered, u render.Unit, change func(*Settings)) *pipeline.Item {
	t.Helper()
	item := r.Item(&u, "ring")
	for _, f := range []struct {
		pipeline.Factory
		decode pipeline.Decode
	}{
		{region.Factory, func(dst any) error {
			s := dst.(*region.Settings)
			s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity, s.RimMM = region.FoundCircle, 6, 0.2, "rim", 0.25
			return nil
		}},
		{flatfield.Factory, nil},
		{Factory, func(dst any) error {
			s := dst.(*Settings)
			s.MaxUnevennessDN = 1.8
			if change != nil {
				change(s)
			}
			return nil
		}},
	} {
		st, _, err := f.New(f.decode, r.Env("ring"))
		if err != nil {
			t.Fatal(err)
		}
		if err := st.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
	}
	return item
}

func TestGoodSurfaceHasNoArea(t *testing.T) {
	s := stagetest.SmallScene()
	s.Processes[0].Populations = []render.Population{{Kind: pipeline.Dig, PerUnit: 6, SizeUM: render.Distribution{Shape: render.ShapeUniform, Min: 40, Max: 180},
		BrightnessDN: render.Distribution{Shape: render.ShapeUniform, Min: 30, Max: 110}}}
	r := stagetest.Render(t, s)
	for i := range 12 {
		item := run(t, r, r.Unit(i), nil)
		if len(item.Defects) > 0 || !item.Proofs[len(item.Proofs)-1].OK {
			t.Errorf("unit %d: %d areas, proof %+v", i, len(item.Defects), item.Proofs[len(item.Proofs)-1])
		}
	}
}

// Stains and a dig of 2 mm are found where they lie and as large as they are, to half a
// cell of 320 µm; each polarity.
func TestLargeDefects(t *testing.T) {
	r := stagetest.Render(t, stagetest.SmallScene())
	for _, o := range []render.Object{
		{Kind: pipeline.Stain, UUM: 500, VUM: -700, DiameterUM: 1800, BrightnessDN: 8},
		{Kind: pipeline.Stain, UUM: -600, VUM: 300, DiameterUM: 1800, BrightnessDN: -6},
		{Kind: pipeline.Dig, UUM: 200, VUM: 600, DiameterUM: 2000, BrightnessDN: 60},
	} {
		u := r.Unit(3)
		u.Add(o)
		item := run(t, r, u, nil)
		if len(item.Defects) != 1 {
			t.Errorf("%s of %g DN: %d areas, want 1", o.Kind, o.BrightnessDN, len(item.Defects))
			continue
		}
		d := item.Defects[0]
		if d.Kind != pipeline.Stain || d.Dark != (o.BrightnessDN < 0) || math.Hypot(d.UUM-o.UUM, d.VUM-o.VUM) > 160 || math.Abs(d.DiameterUM-o.DiameterUM) > 250 || d.Zone != "all" {
			t.Errorf("%s of %g DN at (%g, %g), %g µm: got %s %.0f µm at (%.0f, %.0f), dark %v, zone %q", o.Kind, o.BrightnessDN, o.UUM, o.VUM, o.DiameterUM,
				d.Kind, d.DiameterUM, d.UUM, d.VUM, d.Dark, d.Zone)
		}
	}
}

// What covers much of the part is found as areas, or evenness is not proven.
func TestFilmsPrintsAndPieces(t *testing.T) {
	s := stagetest.SmallScene()
	for i, sp := range []render.Spoiler{{Kind: render.SpoilQuarterStain, Value: 15}, {Kind: render.SpoilFingerprint, Value: 12}, {Kind: render.SpoilOilFilm, Value: 4}, {Kind: render.SpoilBroken, Value: 1.2}} {
		sp.Unit = i
		s.Spoilers = append(s.Spoilers, sp)
	}
	r := stagetest.Render(t, s)
	for i, sp := range s.Spoilers {
		item := run(t, r, r.Unit(i), nil)
		p := item.Proofs[len(item.Proofs)-1]
		if len(item.Defects) == 0 && (p.OK || !strings.Contains(p.Reason, "film")) {
			t.Errorf("%s: no area, and %+v", sp.Kind, p)
		}
		t.Logf("%s: %d areas, unevenness %.2f DN", sp.Kind, len(item.Defects), p.Value)
	}
}

// An area that a defect of the fine search fills is that defect.
func TestFilledArea(t *testing.T) {
	r := stagetest.Render(t, stagetest.SmallScene())
	u := r.Unit(3)
	u.Add(render.Object{Kind: pipeline.Dig, DiameterUM: 1000, BrightnessDN: 60})
	found := run(t, r, u, nil).Defects
	if len(found) != 1 {
		t.Fatalf("%d areas", len(found))
	}
	fine := found[0]
	fine.AreaUM2 = 0.8e6
	if !filled(found[0], []pipeline.Defect{fine}) {
		t.Error("not taken for the one that fills it")
	}
	fine.AreaUM2 = 0.2e6
	if filled(found[0], []pipeline.Defect{fine}) {
		t.Error("a smaller dig in a stain, or the stain's edge, is taken for the stain")
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"cell_px": func(s *Settings) { s.CellPx = 2 }, "order": func(s *Settings) { s.Order = 3 }, "k_sigma": func(s *Settings) { s.KSigma = 0 },
		"min_contrast_dn": func(s *Settings) { s.MinContrastDN = 0 }, "min_diameter_um": func(s *Settings) { s.MinDiameterUM = -1 }, "max_unevenness_dn": func(s *Settings) { s.MaxUnevennessDN = math.NaN() },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}

// Where a fused pass leaves no corrected plane the same areas are found from the raw one.
func TestAreasWithoutTheCorrectedPlane(t *testing.T) {
	s := stagetest.SmallScene()
	s.Spoilers = []render.Spoiler{{Unit: 0, Kind: render.SpoilQuarterStain, Value: 12}}
	r := stagetest.Render(t, s)
	u := r.Unit(0)
	want := run(t, r, u, nil)
	item := *want
	item.Planes = map[string]pipeline.NamedPlane{pipeline.RawPlane: want.Planes[pipeline.RawPlane]}
	item.Defects, item.Proofs, item.Measurements = nil, nil, nil
	if err := (stage{s: Default}).Run(context.Background(), &item); err != nil {
		t.Fatal(err)
	}
	if len(want.Defects) == 0 || len(item.Defects) != len(want.Defects) {
		t.Fatalf("%d areas, with the plane %d", len(item.Defects), len(want.Defects))
	}
	for i, d := range item.Defects {
		if w := want.Defects[i]; math.Abs(d.DiameterUM-w.DiameterUM) > 1e-3 || math.Abs(d.PeakDN-w.PeakDN) > 1e-3 {
			t.Errorf("area %d: %+v, with the plane %+v", i, d, w)
		}
	}
}
