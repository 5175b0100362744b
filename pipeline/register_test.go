package pipeline_test

import (
	"context"
	"math"
	"slices"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
)

// look finds the defects of a unit by the ordinary stages.
func look(t *testing.T, r *stagetest.Rendered, u render.Unit) []pipeline.Defect {
	t.Helper()
	item := r.Item(&u, "ring")
	for _, f := range []pipeline.Factory{region.Factory, flatfield.Factory, darkfield.Factory, blobs.Factory} {
		var decode pipeline.Decode
		if f.Type == "region" {
			decode = func(dst any) error {
				s := dst.(*region.Settings)
				s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity, s.RimMM = region.FoundCircle, 6, 0.2, "rim", 0.25
				return nil
			}
		}
		st, _, err := f.New(decode, r.Env("ring"))
		if err != nil {
			t.Fatal(err)
		}
		if err := st.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
	}
	return item.Defects
}

func dusty() render.Scene {
	s := stagetest.SmallScene()
	sizes := func(low, high float64) render.Distribution {
		return render.Distribution{Shape: render.ShapeUniform, Min: low, Max: high}
	}
	s.Processes[0].Populations = []render.Population{
		{Kind: pipeline.Dig, PerUnit: 8, SizeUM: sizes(60, 160), BrightnessDN: sizes(60, 110)},
		{Kind: pipeline.Particle, PerUnit: 6, SizeUM: sizes(60, 140), BrightnessDN: sizes(60, 110)},
	}
	return s
}

// near returns which defect lies at a place; −1 = none.
func near(list []pipeline.Defect, u, v float64) int {
	return slices.IndexFunc(list, func(d pipeline.Defect) bool { return math.Hypot(d.UUM-u, d.VUM-v) < 40 })
}

// A unit is shown, blown off and shown again as it fell: digs are permanent, particles that
// went or moved are removable, and the rotation is found within 0.2°.
func TestDustIsToldFromDamage(t *testing.T) {
	r := stagetest.Render(t, dusty())
	units := 0
	for i := range 12 {
		before, after := r.Showing(i, 1), r.Showing(i, 2)
		digs := 0
		for _, o := range before.Objects {
			if o.Kind == pipeline.Dig && o.Isolated {
				digs++
			}
		}
		if digs < 4 {
			continue // too few to be sure of the rotation
		}
		units++
		moved := 0
		after.Objects = slices.DeleteFunc(after.Objects, func(o render.Object) bool { moved++; return o.Kind == pipeline.Particle && moved%2 == 0 })
		for k := range after.Objects {
			if o := &after.Objects[k]; o.Kind == pipeline.Particle {
				o.UUM, o.VUM = -o.VUM*0.8, o.UUM*0.7 // blown elsewhere
			}
		}
		a, b := look(t, r, before), look(t, r, after)
		got := pipeline.Register(a, b, pipeline.DefaultRegister)
		if !got.Known {
			t.Errorf("unit %d: unknown, with %d and %d defects", i, len(a), len(b))
			continue
		}
		turn := math.Mod(got.RotationDeg-(after.PartAngleDeg-before.PartAngleDeg)+900, 360) - 180
		if math.Abs(turn) > 0.2 || got.RMSUM > 20 {
			t.Errorf("unit %d: turned by %.2f° too much, pairs %.1f µm apart", i, turn, got.RMSUM)
		}
		for _, o := range before.Objects {
			k := near(a, o.UUM, o.VUM)
			if !o.Isolated || k < 0 {
				continue
			}
			if want := o.Kind == pipeline.Dig; slices.Contains(got.Permanent, k) != want || slices.Contains(got.Removable, k) == want {
				t.Errorf("unit %d: %s at (%.0f, %.0f): permanent %v, want %v", i, o.Kind, o.UUM, o.VUM, !want, want)
			}
		}
	}
	if units < 6 {
		t.Fatalf("only %d units had enough digs", units)
	}
}

func at(u, v, diameter float64) pipeline.Defect {
	return pipeline.Defect{Place: pipeline.Place{UUM: u, VUM: v}, DiameterUM: diameter, SNR: diameter}
}

// Two surfaces that have nothing in common, a pattern that fits twice, and too few defects
// give no registration.
func TestNothingIsKnownWithoutEnoughInCommon(t *testing.T) {
	three := []pipeline.Defect{at(1000, 0, 50), at(0, 2000, 60), at(-1500, -300, 70)}
	if r := pipeline.Register(three, three, pipeline.DefaultRegister); !r.Known || len(r.Pairs) != 3 || math.Abs(math.Remainder(r.RotationDeg, 360)) > 1e-9 {
		t.Errorf("itself: %+v", r)
	}
	for name, pair := range map[string][2][]pipeline.Defect{
		"nothing": {nil, nil}, "few": {three[:2], three[:2]},
		"other":     {three, {at(2500, 0, 50), at(0, 900, 60), at(-2000, -1300, 70)}},
		"symmetric": {{at(1000, 0, 50), at(-1000, 0, 50), at(0, 1000, 50), at(0, -1000, 50)}, {at(1000, 0, 50), at(-1000, 0, 50), at(0, 1000, 50), at(0, -1000, 50)}},
	} {
		if r := pipeline.Register(pair[0], pair[1], pipeline.DefaultRegister); r.Known {
			t.Errorf("%s: %+v", name, r)
		}
	}
}

// Where the part's angle is known, it is the rotation.
func TestRegistrationByTheDatum(t *testing.T) {
	turned := func(list []pipeline.Defect, deg float64) []pipeline.Defect {
		sin, cos := math.Sincos(deg * math.Pi / 180)
		out := slices.Clone(list)
		for i := range out {
			d := &out[i]
			d.PartUUM, d.PartVUM, d.PartAngleKnown = d.UUM, d.VUM, true
			d.UUM, d.VUM = cos*d.PartUUM-sin*d.PartVUM, sin*d.PartUUM+cos*d.PartVUM
		}
		return out
	}
	square := []pipeline.Defect{at(1000, 0, 50), at(-1000, 0, 50), at(0, 1000, 50), at(0, -1000, 50)}
	if r := pipeline.Register(turned(square, 10), turned(square, 130), pipeline.DefaultRegister); !r.Known || math.Abs(r.RotationDeg-120) > 1e-6 {
		t.Errorf("got %+v, want 120°", r)
	}
}

// A turn that is known needs no pairs, and nothing left needs no turn.
func TestWhatIsGoneWithoutPairs(t *testing.T) {
	turn := 90.0
	known := pipeline.DefaultRegister
	known.TurnDeg = &turn
	first := []pipeline.Defect{at(1000, 0, 50), at(0, 2000, 60)}
	if r := pipeline.Register(first, []pipeline.Defect{at(20, 1090, 50), at(500, 500, 60)}, known); !r.Known || !slices.Equal(r.Permanent, []int{0}) || !slices.Equal(r.Removable, []int{1}) || !slices.Equal(r.Arrived, []int{1}) {
		t.Errorf("by the datum: %+v", r)
	}
	if r := pipeline.Register(first, nil, pipeline.DefaultRegister); !r.Known || !slices.Equal(r.Removable, []int{0, 1}) || r.RMSUM != 0 {
		t.Errorf("nothing left: %+v", r)
	}
}
