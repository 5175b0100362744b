package classify

import (
	"context"
	"math"
	"slices"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/limits"
)

var ordered = Settings{
	Rules: []Rule{
		{Kind: "edge chip", When: `zone == "rim" && edge_distance_um < 50`},
		{Kind: "scratch", When: "length_um > 4*width_um && width_um >= 10"},
		{Kind: "stain", When: "diameter_um > 500"},
		{Kind: "stain", When: "area_um2 / width_um > 400"},
	},
	DefaultKind: "particle",
}

func run(t *testing.T, s Settings, item *pipeline.Item) error {
	t.Helper()
	st, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	return st.Run(context.Background(), item)
}

func TestFirstMatchWins(t *testing.T) {
	in := []pipeline.Defect{
		{Zone: "rim", EdgeDistanceUM: 20, LengthUM: 500, WidthUM: 20}, // chip before scratch
		{Zone: "rim", EdgeDistanceUM: 80, LengthUM: 500, WidthUM: 20},
		{LengthUM: 500, WidthUM: 9, DiameterUM: 80},
		{LengthUM: 600, WidthUM: 600, DiameterUM: 600},
		{LengthUM: 60, WidthUM: 60, DiameterUM: 60},
	}
	item := &pipeline.Item{Defects: slices.Clone(in)}
	given := item.Defects
	if err := run(t, ordered, item); err != nil {
		t.Fatal(err)
	}
	want := []pipeline.Kind{pipeline.EdgeChip, pipeline.Scratch, pipeline.Particle, pipeline.Stain, pipeline.Particle}
	for i, d := range item.Defects {
		if d.Kind != want[i] {
			t.Errorf("defect %d: got %q, want %q", i, d.Kind, want[i])
		}
	}
	if given[0].Kind != "" {
		t.Error("the list that was given has been changed in place")
	}
}

func TestDefaultTellsLongFromShort(t *testing.T) {
	item := &pipeline.Item{Defects: []pipeline.Defect{{LengthUM: 400, WidthUM: 100}, {LengthUM: 399, WidthUM: 100}}}
	if err := run(t, Default, item); err != nil {
		t.Fatal(err)
	}
	if a, b := item.Defects[0].Kind, item.Defects[1].Kind; a != pipeline.Scratch || b != pipeline.Dig {
		t.Errorf("got %s and %s, want scratch and dig", a, b)
	}
}

func TestRuleThatCannotBeEvaluatedFails(t *testing.T) {
	for name, d := range map[string]pipeline.Defect{
		"division by zero": {ID: 7, View: "ring"},
		"no number":        {ID: 7, View: "ring", WidthUM: math.NaN()},
	} {
		item := &pipeline.Item{Defects: []pipeline.Defect{d}}
		if err := run(t, ordered, item); err == nil || !strings.Contains(err.Error(), "defect 7 of view ring: rules[") {
			t.Errorf("%s: got %v, want an error that names defect and rule", name, err)
		}
	}
}

func TestUnitWithoutMergeKeepsAllDefects(t *testing.T) {
	item := &pipeline.Item{Views: []*pipeline.Item{{Defects: []pipeline.Defect{{ID: 1}, {ID: 2}}}, {Defects: []pipeline.Defect{{ID: 1}}}}}
	if err := run(t, Default, item); err != nil || len(item.Defects) != 3 {
		t.Errorf("got %d defects and %v, want 3", len(item.Defects), err)
	}
	item.Defects = []pipeline.Defect{}
	if err := run(t, Default, item); err != nil || len(item.Defects) != 0 {
		t.Errorf("after a merge that left none: got %d defects and %v, want 0", len(item.Defects), err)
	}
}

func TestCheck(t *testing.T) {
	bad := Settings{DefaultKind: "pit", Rules: []Rule{{Kind: "scrach", When: "lenght_um > 1"}, {Kind: "dig", When: "snr"}}}
	err := bad.Check()
	if err == nil {
		t.Fatal("accepted")
	}
	for _, part := range []string{
		`default_kind: got "pit", want one of dig, scratch, edge chip, stain, particle, fibre`,
		`rules[0].kind: got "scrach"`, `(did you mean "scratch"?)`,
		`rules[0].when: 1:1: unknown name 'lenght_um' (did you mean 'length_um'?)`,
		`rules[1].when: 1:1: the expression gives a number, want a condition (true or false)`,
	} {
		if !strings.Contains(err.Error(), part) {
			t.Errorf("got %v\nwithout %s", err, part)
		}
	}
}

func TestFactories(t *testing.T) {
	for _, f := range []pipeline.Factory{Factory(), ViewFactory()} {
		st, used, err := f.New(nil, pipeline.Environment{})
		if err != nil || st == nil || used.(Settings).DefaultKind != "dig" {
			t.Errorf("%s: got %v, %v, %v", f.Type, st, used, err)
		}
	}
	if u, v := Factory(), ViewFactory(); u.Scope != pipeline.ScopeUnit || v.Scope != pipeline.ScopeView || u.Type == v.Type {
		t.Error("the two factories must differ in type and scope")
	}
}

// One word per thing: a rule and a limit know a defect by the same names.
func TestNamesAreThoseOfLimits(t *testing.T) {
	var want []string
	for _, v := range limits.Measures().Vars() {
		want = append(want, v.Name)
	}
	if got := Names(); !slices.Equal(got, want) {
		t.Errorf("got %v\nwant %v", got, want)
	}
}

// What is told by slope keeps its kind, whatever its shape.
func TestDentsKeepTheirKind(t *testing.T) {
	item := &pipeline.Item{Defects: []pipeline.Defect{{Kind: pipeline.Dent, LengthUM: 900, WidthUM: 100, SlopeMrad: 2}, {Kind: pipeline.Waviness, SlopeMrad: 1}}}
	if err := run(t, Default, item); err != nil {
		t.Fatal(err)
	}
	if item.Defects[0].Kind != pipeline.Dent || item.Defects[1].Kind != pipeline.Waviness {
		t.Errorf("got %+v", item.Defects)
	}
	item = &pipeline.Item{Defects: []pipeline.Defect{{SlopeMrad: 2}, {}}}
	if err := run(t, Settings{Rules: []Rule{{Kind: "dent", When: "slope_mrad > 1"}}, DefaultKind: "dig"}, item); err != nil {
		t.Fatal(err)
	}
	if item.Defects[0].Kind != pipeline.Dent || item.Defects[1].Kind != pipeline.Dig {
		t.Errorf("got %+v", item.Defects)
	}
}

// What is told by the outline keeps its kind too: a chip is longer along the edge than deep.
func TestChipsKeepTheirKind(t *testing.T) {
	item := &pipeline.Item{Defects: []pipeline.Defect{{Kind: pipeline.EdgeChip, LengthUM: 1600, WidthUM: 300}}}
	if err := run(t, Default, item); err != nil || item.Defects[0].Kind != pipeline.EdgeChip {
		t.Errorf("got %+v, %v", item.Defects, err)
	}
}
