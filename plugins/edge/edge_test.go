package edge

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

// scene is the small scene at 10 µm/px: a disc of 3 mm.
func scene() render.Scene {
	s := stagetest.SmallScene()
	s.Camera.UMPerPx, s.Part.DiameterMM, s.Part.ClearApertureMM = 10, 3, 2.6
	s.Lamp = render.Lamp{MinPower: 0.9, MaxPower: 1.1}
	return s
}

func run(t *testing.T, r *stagetest.Rendered, u render.Unit, change func(*Settings)) *pipeline.Item {
	t.Helper()
	item := r.Item(&u, "back")
	for _, f := range []struct {
		pipeline.Factory
		decode pipeline.Decode
	}{
		{region.Factory, func(dst any) error {
			s := dst.(*region.Settings)
			s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity, s.MaxEdgeRMSPx = region.FoundCircle, 3, 0.1, "dark", 2
			return nil
		}},
		{Factory, func(dst any) error {
			s := dst.(*Settings)
			s.MinReachUM, s.MaxReachUM = 20, 900
			if change != nil {
				change(s)
			}
			return nil
		}},
	} {
		st, _, err := f.New(f.decode, r.Env("back"))
		if err != nil {
			t.Fatal(err)
		}
		if err := st.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
	}
	return item
}

func chipAt(angleDeg, reachUM, lengthUM float64) render.Object {
	sin, cos := math.Sincos(angleDeg * math.Pi / 180)
	return render.Object{Kind: pipeline.EdgeChip, UUM: 1500 * cos, VUM: 1500 * sin, WidthUM: reachUM, LengthUM: lengthUM, BrightnessDN: 100}
}

// Chips of 60 to 600 µm are measured within 15 µm at 10 µm/px, under any lamp and place.
func TestReachOfChips(t *testing.T) {
	r := stagetest.Render(t, scene())
	worst, n := 0., 0
	for i := range 12 {
		u := r.Unit(i)
		want := []render.Object{chipAt(25+7*float64(i), 60+20*float64(i), 150+40*float64(i)), chipAt(200+11*float64(i), 600-40*float64(i), 900)}
		for _, o := range want {
			u.Add(o)
		}
		item := run(t, r, u, nil)
		if len(item.Defects) != 2 {
			t.Errorf("unit %d: %d chips, want 2", i, len(item.Defects))
			continue
		}
		for _, o := range want {
			d := nearest(item.Defects, o)
			off := d.WidthUM - o.WidthUM
			n++
			worst = max(worst, math.Abs(off))
			if math.Abs(off) > 15 || d.Kind != pipeline.EdgeChip || math.Abs(d.LengthUM-o.LengthUM) > 0.2*o.LengthUM+30 {
				t.Errorf("unit %d: reach %.1f µm and %.0f µm along the edge, want %.0f and %.0f", i, d.WidthUM, d.LengthUM, o.WidthUM, o.LengthUM)
			}
		}
	}
	t.Logf("%d chips, reach off by %.1f µm at most", n, worst)
}

func nearest(list []pipeline.Defect, o render.Object) pipeline.Defect {
	best := list[0]
	for _, d := range list {
		if math.Hypot(d.UUM-o.UUM, d.VUM-o.VUM) < math.Hypot(best.UUM-o.UUM, best.VUM-o.VUM) {
			best = d
		}
	}
	return best
}

func TestWholeEdgeHasNoChip(t *testing.T) {
	r := stagetest.Render(t, scene())
	for i := range 8 {
		if item := run(t, r, r.Unit(i), nil); len(item.Defects) != 0 || item.Coverage.Share != 1 {
			t.Errorf("unit %d: %d chips, coverage %g", i, len(item.Defects), item.Coverage.Share)
		}
	}
}

// A notch that belongs there is no chip; a chip beside it is.
func TestNotchIsNoChip(t *testing.T) {
	s := scene()
	s.Part.Notch = render.Notch{DepthUM: 300, WidthUM: 400}
	r := stagetest.Render(t, s)
	notch := func(s *Settings) { s.NotchReachUM, s.NotchLengthUM = 300, 400 }
	for i := range 4 {
		u := r.Unit(i)
		if n := len(run(t, r, u, notch).Defects); n != 0 {
			t.Errorf("unit %d: %d chips, want none", i, n)
		}
		u.Add(chipAt(u.PartAngleDeg+90, 150, 250))
		if found := run(t, r, u, notch).Defects; len(found) != 1 || math.Abs(found[0].WidthUM-150) > 15 {
			t.Errorf("unit %d: got %+v, want the chip of 150 µm", i, found)
		}
		if n := len(run(t, r, u, nil).Defects); n != 2 {
			t.Errorf("unit %d: %d chips without a notch in the recipe, want 2", i, n)
		}
	}
}

// A chip that runs into the notch is told from it: the notch's length is taken out.
func TestChipAtTheNotch(t *testing.T) {
	s := scene()
	s.Part.Notch = render.Notch{DepthUM: 300, WidthUM: 400}
	r := stagetest.Render(t, s)
	for i := range 4 {
		u := r.Unit(i)
		beside := 280 / 1500. * 180 / math.Pi // 280 µm along the edge of a radius of 1.5 mm
		u.Add(chipAt(u.PartAngleDeg+beside, 160, 300))
		found := run(t, r, u, func(s *Settings) { s.NotchReachUM, s.NotchLengthUM, s.MinReachUM = 300, 400, 60 }).Defects
		if len(found) != 1 || found[0].WidthUM > 200 || found[0].WidthUM < 80 {
			t.Errorf("unit %d: got %+v, want one chip of about 160 µm", i, found)
		}
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"polarity": func(s *Settings) { s.Polarity = "rim" }, "min_reach_um": func(s *Settings) { s.MinReachUM = -1 },
		"max_reach_um": func(s *Settings) { s.MinReachUM, s.MaxReachUM = 20, 10 }, "notch_length_um": func(s *Settings) { s.NotchReachUM = 10 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
