package merge

import (
	"context"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"lapgate/pipeline"
)

// view returns a view of 10 µm per px whose origin is pixel (500, 500), with the defects
// numbered; places in px and radii are turned into µm.
func view(name string, defects ...pipeline.Defect) *pipeline.Item {
	g := pipeline.Planar{OriginX: 500, OriginY: 500, UMPerPx: 10}
	for i := range defects {
		d := &defects[i]
		d.ID, d.View = i+1, name
		d.UUM, d.VUM, _ = g.ToStation(d.XPx, d.YPx)
	}
	return &pipeline.Item{View: name, Geometry: g, Defects: defects}
}

func dig(x, y, diameterUM, snr float64) pipeline.Defect {
	return pipeline.Defect{Place: pipeline.Place{XPx: x, YPx: y}, DiameterUM: diameterUM, LengthUM: diameterUM, WidthUM: diameterUM, SNR: snr}
}

// scratch runs level from x0 to x1 at height y.
func scratch(x0, x1, y, widthUM, snr float64) pipeline.Defect {
	return pipeline.Defect{Place: pipeline.Place{XPx: (x0 + x1) / 2, YPx: y}, LengthUM: (x1 - x0) * 10, LengthPx: x1 - x0, WidthUM: widthUM,
		WidthPx: widthUM / 10, SNR: snr, Path: []pipeline.Point{{X: x0, Y: y}, {X: (x0 + x1) / 2, Y: y}, {X: x1, Y: y}}}
}

func merged(t *testing.T, s Settings, views ...*pipeline.Item) []pipeline.Defect {
	t.Helper()
	unit := &pipeline.Item{Views: views}
	if err := New(s).Run(context.Background(), unit); err != nil {
		t.Fatal(err)
	}
	return unit.Defects
}

func TestCases(t *testing.T) {
	for name, c := range map[string]struct {
		ring, bar []pipeline.Defect
		want      int
	}{
		"nothing":                         {nil, nil, 0},
		"one view":                        {[]pipeline.Defect{dig(100, 100, 80, 9)}, nil, 1},
		"same place":                      {[]pipeline.Defect{dig(100, 100, 80, 9)}, []pipeline.Defect{dig(103, 104, 90, 20)}, 1},
		"just within 50 + 40 µm":          {[]pipeline.Defect{dig(100, 100, 80, 9)}, []pipeline.Defect{dig(108.9, 100, 90, 20)}, 1},
		"just beyond":                     {[]pipeline.Defect{dig(100, 100, 80, 9)}, []pipeline.Defect{dig(109.1, 100, 90, 20)}, 2},
		"dig within a stain":              {[]pipeline.Defect{dig(100, 100, 80, 9)}, []pipeline.Defect{dig(100, 100, 2000, 20)}, 2},
		"two near digs of one view":       {[]pipeline.Defect{dig(100, 100, 80, 9), dig(106, 100, 80, 9)}, []pipeline.Defect{dig(103, 100, 90, 20)}, 2},
		"same scratch, partly":            {[]pipeline.Defect{scratch(100, 500, 200, 20, 9)}, []pipeline.Defect{scratch(150, 300, 202, 20, 9)}, 1},
		"one whole, three pieces":         {[]pipeline.Defect{scratch(100, 500, 200, 20, 9)}, []pipeline.Defect{scratch(100, 200, 201, 20, 30), scratch(220, 300, 199, 20, 5), scratch(350, 500, 200, 20, 5)}, 1},
		"two scratches end to end":        {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{scratch(310, 500, 200, 20, 9)}, 2},
		"parallel, 80 µm apart":           {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{scratch(100, 300, 208, 20, 9)}, 2},
		"small dig on a scratch":          {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{dig(150, 201, 40, 9)}, 1},
		"large dig on a scratch":          {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{dig(150, 201, 200, 9)}, 2},
		"long without a path":             {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{{Place: pipeline.Place{XPx: 200, YPx: 200}, LengthUM: 1000, LengthPx: 100, WidthUM: 20, SNR: 4}}, 1},
		"long without a path, athwart":    {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{{Place: pipeline.Place{XPx: 200, YPx: 200}, LengthUM: 1000, LengthPx: 100, WidthUM: 20, AngleDeg: 90, SNR: 4}}, 2},
		"dig beyond the scratch's end":    {[]pipeline.Defect{scratch(100, 300, 200, 20, 9)}, []pipeline.Defect{dig(310, 200, 20, 9)}, 2},
		"same view, same place stays two": {[]pipeline.Defect{dig(100, 100, 80, 9), dig(100, 100, 80, 9)}, nil, 2},
	} {
		if got := merged(t, Default, view("ring", c.ring...), view("bar", c.bar...)); len(got) != c.want {
			t.Errorf("%s: got %d defects, want %d: %+v", name, len(got), c.want, got)
		}
	}
}

func TestMeasuresOfTheClearestView(t *testing.T) {
	got := merged(t, Default, view("ring", dig(10, 10, 70, 3), dig(100, 100, 80, 9)), view("bar", dig(103, 104, 90, 20)))
	want := view("bar", dig(103, 104, 90, 20)).Defects[0]
	want.SeenIn = []string{"bar", "ring"}
	want.MergedFrom = []pipeline.Ref{{View: "bar", ID: 1}, {View: "ring", ID: 2}}
	if len(got) != 2 || !reflect.DeepEqual(got[0], want) {
		t.Errorf("got %+v\nwant %+v first of 2", got, want)
	}
	if s := got[1].SeenIn; !slices.Equal(s, []string{"ring"}) || got[1].ID != 2 {
		t.Errorf("second: seen in %v with id %d, want ring and 2", s, got[1].ID)
	}
}

// A clear piece of a scratch must not stand for the whole of it.
func TestLengthOfTheWholeScratch(t *testing.T) {
	got := merged(t, Default, view("ring", scratch(100, 500, 200, 20, 9)), view("bar", scratch(100, 200, 200, 20, 30), scratch(250, 400, 200, 20, 30)))
	if len(got) != 1 || got[0].LengthUM != 4000 || len(got[0].MergedFrom) != 3 {
		t.Errorf("got %+v, want one scratch of 4000 µm made of 3", got)
	}
}

func TestViewsOfDifferentOrientation(t *testing.T) {
	a := view("ring", dig(600, 500, 80, 9)) // u = 1000 µm
	b := &pipeline.Item{View: "bar", Geometry: pipeline.Planar{OriginX: 250, OriginY: 250, UMPerPx: 20, RotationDeg: 90}}
	d := dig(250, 300, 80, 12) // 50 px down, turned by 90°: u = 1000 µm
	d.ID = 1
	d.UUM, d.VUM, _ = b.Geometry.ToStation(d.XPx, d.YPx)
	b.Defects = []pipeline.Defect{d}
	if got := merged(t, Default, a, b); len(got) != 1 {
		t.Errorf("got %d defects, want 1: %+v", len(got), got)
	}
}

// The order of the views does not matter, every defect of every view ends in exactly one
// merged defect, and merging does not touch the views' own lists.
func TestOrderOfViewsDoesNotMatter(t *testing.T) {
	for seed := range uint64(60) {
		r := rand.New(rand.NewPCG(seed, 7))
		names := []string{"ring", "bar", "back"}
		var views []*pipeline.Item
		total := 0
		for _, n := range names {
			defects := scene(r, seed)
			total += len(defects)
			views = append(views, view(n, defects...))
		}
		first := merged(t, Default, views...)
		refs := map[pipeline.Ref]int{}
		for i, d := range first {
			if d.ID != i+1 {
				t.Fatalf("seed %d: id %d at place %d", seed, d.ID, i)
			}
			for _, ref := range d.MergedFrom {
				refs[ref]++
			}
		}
		if len(refs) != total {
			t.Fatalf("seed %d: %d of %d defects are in the result", seed, len(refs), total)
		}
		for range 5 {
			r.Shuffle(len(views), func(i, j int) { views[i], views[j] = views[j], views[i] })
			if again := merged(t, Default, views...); !reflect.DeepEqual(first, again) {
				t.Fatalf("seed %d: the order of the views changed the result\n%+v\n%+v", seed, first, again)
			}
		}
	}
}

// scene is a crowd of defects near the same spots with jitter, so that ties and chains
// occur.
func scene(r *rand.Rand, seed uint64) []pipeline.Defect {
	spots := rand.New(rand.NewPCG(seed, 1))
	var out []pipeline.Defect
	for range 12 {
		x, y := 400+200*spots.Float64(), 400+200*spots.Float64()
		kind := spots.IntN(3)
		if r.IntN(4) == 0 {
			continue
		}
		dx, dy := float64(r.IntN(9)-4), float64(r.IntN(9)-4)
		switch kind {
		case 0, 1:
			out = append(out, dig(x+dx, y+dy, 40+20*float64(r.IntN(4)), float64(r.IntN(5))))
		default:
			out = append(out, scratch(x+dx, x+dx+50, y+dy/4, 20, float64(r.IntN(5))))
		}
	}
	return out
}

func TestRepeatedOnItsOwnResultChangesNothing(t *testing.T) {
	v := view("ring", dig(100, 100, 80, 9), scratch(100, 300, 200, 20, 5))
	before := slices.Clone(v.Defects)
	first := merged(t, Default, v)
	if second := merged(t, Default, v); !reflect.DeepEqual(first, second) || !reflect.DeepEqual(before, v.Defects) {
		t.Error("running twice gave another result, or changed the view")
	}
}

func TestCancelled(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if err := New(Default).Run(ctx, &pipeline.Item{Views: []*pipeline.Item{view("ring", dig(1, 1, 2, 3))}}); err == nil {
		t.Error("a cancelled context was not noticed")
	}
}

func TestSettings(t *testing.T) {
	f := Factory()
	if f.Defaults != Default {
		t.Errorf("defaults: got %+v, want %+v", f.Defaults, Default)
	}
	for _, bad := range []Settings{{ToleranceUM: -1, SizeRatio: 3}, {ToleranceUM: 1}, {ToleranceUM: 1, SizeRatio: 0.5}} {
		if _, _, err := f.New(func(dst any) error { *dst.(*Settings) = bad; return nil }, pipeline.Environment{}); err == nil {
			t.Errorf("%+v was accepted", bad)
		}
	}
	if stage, used, err := f.New(nil, pipeline.Environment{}); err != nil || stage == nil || used != Default {
		t.Errorf("without a file: got %v, %+v, %v", stage, used, err)
	}
}

// A dent keeps its slope: it is not joined with a dig at its place, whose light is clearer,
// and of two views that measured it the steeper slope stands.
func TestSlopeIsNotLostInAMerge(t *testing.T) {
	dent := func(x, slope, snr float64) pipeline.Defect {
		d := dig(x, 100, 80, snr)
		d.Kind, d.SlopeMrad = pipeline.Dent, slope
		return d
	}
	got := merged(t, Default, view("fringes", dent(100, 2, 0)), view("ring", dig(100, 100, 80, 30)))
	if len(got) != 2 || got[0].Kind == pipeline.Dent || got[1].SlopeMrad != 2 {
		t.Errorf("got %+v, want the dig and the dent", got)
	}
	got = merged(t, Default, view("fringes", dent(100, 2, 0)), view("turned", dent(101, 3, 0)))
	if len(got) != 1 || got[0].SlopeMrad != 3 {
		t.Errorf("got %+v, want one dent of 3 mrad", got)
	}
}

// A chip that is bright in dark field is not joined with what the ring light shows there: it
// would be lost as a dig.
func TestAChipIsNotLostInAMerge(t *testing.T) {
	chip := dig(100, 100, 80, 10)
	chip.Kind = pipeline.EdgeChip
	if got := merged(t, Default, view("back", chip), view("ring", dig(101, 100, 80, 30))); len(got) != 2 {
		t.Errorf("got %+v, want the chip and what the ring light shows", got)
	}
}
