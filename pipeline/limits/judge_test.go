package limits

import (
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
)

func ptr(f float64) *float64 { return &f }

// evidence is a unit seen in one view, with a dig of 210 µm in the zone "clear" and a
// scratch 40 µm wide in "rim".
func evidence() pipeline.Evidence {
	return pipeline.Evidence{
		Coverage: 0.99,
		Views: []pipeline.ViewEvidence{{
			Name:   "ring",
			Region: pipeline.RegionEvidence{Zones: []pipeline.ZoneEvidence{{Name: "clear", AreaMM2: 400}, {Name: "rim", AreaMM2: 90}}},
			Proofs: []pipeline.Proof{{Name: "light", OK: true}},
		}},
		Defects: []pipeline.Defect{
			{ID: 1, Kind: pipeline.Dig, View: "ring", Zone: "clear", DiameterUM: 210, AreaUM2: 34636, SNR: 30},
			{ID: 2, Kind: pipeline.Scratch, View: "ring", Zone: "rim", WidthUM: 40, LengthUM: 900, AreaUM2: 36000, SNR: 12},
		},
	}
}

func judge(t *testing.T, e pipeline.Evidence, specs ...Spec) (pipeline.Verdict, []pipeline.Reason) {
	t.Helper()
	j, err := New(specs, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	return j.Judge(e)
}

var (
	digSize   = Spec{Name: "dig size", Kind: "dig", Each: "diameter_um", AtMost: ptr(200), Unit: "um"}
	digKept   = Spec{Name: "dig size", Kind: "dig", Each: "diameter_um", AtMost: ptr(210), Unit: "um"}
	rimCount  = Spec{Name: "rim count", Zone: "rim", Value: "defects.size()", AtMost: ptr(0), Unit: "1"}
	anyLong   = Spec{Name: "long", Broken: "defects.exists(d, d.length_um > 800)"}
	totalArea = Spec{Name: "total area", Value: "sum(defects.map(d, d.area_um2))", AtMost: ptr(70000), Unit: "um2"}
)

func TestAccept(t *testing.T) {
	if v, r := judge(t, evidence(), digKept); v != pipeline.Accept || r != nil {
		t.Errorf("got %s %v, want accept without a reason: a value at its limit is kept", v, r)
	}
}

func TestEveryBrokenLimitIsListedWithItsExcess(t *testing.T) {
	v, reasons := judge(t, evidence(), digSize, rimCount, anyLong, totalArea)
	if v != pipeline.Reject || len(reasons) != 4 {
		t.Fatalf("got %s with %d reasons, want reject with 4: %v", v, len(reasons), reasons)
	}
	for i, want := range []pipeline.Reason{
		{Name: "dig size", DefectID: 1, Value: 210, Limit: 200, Over: 10, Unit: "um", Rule: "diameter_um"},
		{Name: "rim count", Zone: "rim", Value: 1, Limit: 0, Over: 1, Unit: "1", Rule: "defects.size()"},
		{Name: "long", Rule: anyLong.Broken},
		{Name: "total area", Value: 70636, Limit: 70000, Over: 636, Unit: "um2", Rule: totalArea.Value},
	} {
		got := reasons[i]
		want.Verdict, want.Text = pipeline.Reject, got.Text
		if got != want {
			t.Errorf("reason %d: got %+v\nwant %+v", i, got, want)
		}
	}
	if want := "dig 1 at (0.0, 0.0) px of view ring: diameter_um is 210 um, at most 200 allowed (by +10)"; reasons[0].Text != want {
		t.Errorf("text: got %q, want %q", reasons[0].Text, want)
	}
}

func TestVerdictHold(t *testing.T) {
	s := digSize
	s.Verdict = "hold"
	if v, r := judge(t, evidence(), s); v != pipeline.Hold || len(r) != 1 {
		t.Errorf("got %s %v, want hold", v, r)
	}
}

// A kept limit is never an accept while anything is not proven, and a broken one is a
// reject only where the evidence can be trusted.
func TestPrecedence(t *testing.T) {
	for name, c := range map[string]struct {
		spoil func(*pipeline.Evidence)
		kept  pipeline.Verdict // all limits kept
		upper pipeline.Verdict // a defect over at_most
		free  pipeline.Verdict // a free condition is true
	}{
		"nothing":      {func(e *pipeline.Evidence) {}, pipeline.Accept, pipeline.Reject, pipeline.Reject},
		"proof":        {func(e *pipeline.Evidence) { e.Views[0].Proofs[0].OK = false }, pipeline.Hold, pipeline.Hold, pipeline.Hold},
		"stage failed": {failure(pipeline.ReasonStageFailed), pipeline.Hold, pipeline.Hold, pipeline.Hold},
		"late":         {failure(pipeline.ReasonLate), pipeline.Hold, pipeline.Hold, pipeline.Hold},
		"missing view": {failure(pipeline.ReasonMissingView), pipeline.Hold, pipeline.Reject, pipeline.Hold},
		"truncated":    {func(e *pipeline.Evidence) { e.Truncated = true }, pipeline.Hold, pipeline.Reject, pipeline.Hold},
		"saturated":    {func(e *pipeline.Evidence) { e.Saturated = true }, pipeline.Hold, pipeline.Reject, pipeline.Hold},
		"coverage":     {func(e *pipeline.Evidence) { e.Coverage = 0.94 }, pipeline.Hold, pipeline.Reject, pipeline.Hold},
		"no coverage":  {func(e *pipeline.Evidence) { e.Coverage = math.NaN() }, pipeline.Hold, pipeline.Reject, pipeline.Hold},
		"no view":      {func(e *pipeline.Evidence) { e.Views = nil }, pipeline.Hold, pipeline.Hold, pipeline.Hold},
	} {
		e := evidence()
		c.spoil(&e)
		for _, one := range []struct {
			spec Spec
			want pipeline.Verdict
		}{{digKept, c.kept}, {digSize, c.upper}, {anyLong, c.free}} {
			if v, r := judge(t, e, one.spec); v != one.want || (v == pipeline.Accept) != (len(r) == 0) {
				t.Errorf("%s, %s: got %s %v, want %s", name, one.spec.Name, v, r, one.want)
			}
		}
	}
}

func failure(reason string) func(*pipeline.Evidence) {
	return func(e *pipeline.Evidence) { e.Failures = []pipeline.Failure{{Reason: reason, Detail: "x"}} }
}

// A lower limit may be broken only because part of the unit was not seen.
func TestLowerLimitNeedsTheWholeEvidence(t *testing.T) {
	mark := Spec{Name: "datum mark", Kind: "stain", Value: "defects.size()", AtLeast: ptr(1), Unit: "1"}
	if v, r := judge(t, evidence(), mark); v != pipeline.Reject || r[0].Over != -1 {
		t.Errorf("got %s %v, want reject by -1", v, r)
	}
	e := evidence()
	failure(pipeline.ReasonMissingView)(&e)
	if v, _ := judge(t, e, mark); v != pipeline.Hold {
		t.Errorf("with a missing view: got %s, want hold", v)
	}
}

// ISO 14253-1: with expanded uncertainty U, conformity is proven at or below the upper
// limit − U, nonconformity above the limit + U, neither in between.
func TestGuardBand(t *testing.T) {
	for _, c := range []struct {
		value, u, percent float64
		want              pipeline.Verdict
	}{
		{190, 10, 0, pipeline.Accept}, {190.5, 10, 0, pipeline.Hold}, {200, 10, 0, pipeline.Hold},
		{210, 10, 0, pipeline.Hold}, {210.5, 10, 0, pipeline.Reject},
		{190, 0, 5, pipeline.Accept}, // 190 + 5 % = 199.5
		{191, 0, 5, pipeline.Hold},   // 200.55
		{210, 0, 5, pipeline.Hold},   // 210 − 5 % = 199.5
		{211, 0, 5, pipeline.Reject}, // 200.45
	} {
		e := evidence()
		e.Defects[0].DiameterUM = c.value
		s := digSize
		s.Uncertainty, s.UncertaintyPercent = c.u, c.percent
		if v, r := judge(t, e, s); v != c.want {
			t.Errorf("%v with U = %v or %v %%: got %s %v, want %s", c.value, c.u, c.percent, v, r, c.want)
		}
	}
}

func TestWhatCannotBeJudgedIsHeldByName(t *testing.T) {
	for name, c := range map[string]struct {
		spec  Spec
		spoil func(*pipeline.Evidence)
		says  string
	}{
		"division":  {Spec{Name: "ratio", Each: "length_um / width_um > 99"}, nil, "finite"},
		"NaN":       {digSize, func(e *pipeline.Evidence) { e.Defects[0].DiameterUM = math.NaN() }, "diameter_um"},
		"empty min": {Spec{Name: "gap", Kind: "stain", Value: "min(defects.map(d, d.snr))", AtLeast: ptr(1), Unit: "1"}, nil, "empty"},
		"zone":      {Spec{Name: "typo", Zone: "claer", Each: "diameter_um > 1"}, nil, "has clear, rim"},
		"no area": {Spec{Name: "density", Value: "defects.size() / zone_area_mm2", AtMost: ptr(99), Unit: "1/mm2"},
			func(e *pipeline.Evidence) { e.Views[0].Region.Zones = nil }, "zone_area_mm2"},
	} {
		e := evidence()
		if c.spoil != nil {
			c.spoil(&e)
		}
		v, r := judge(t, e, c.spec)
		if v != pipeline.Hold || len(r) == 0 || r[0].Name != c.spec.Name || !strings.Contains(r[0].Text, c.says) {
			t.Errorf("%s: got %s %+v, want a hold named %q that says %q", name, v, r, c.spec.Name, c.says)
		}
	}
}

func TestZoneArea(t *testing.T) {
	density := Spec{Name: "density", Zone: "rim", Value: "defects.size() / zone_area_mm2", AtMost: ptr(0.01), Unit: "1/mm2"}
	if v, r := judge(t, evidence(), density); v != pipeline.Reject || math.Abs(r[0].Value-1.0/90) > 1e-12 {
		t.Errorf("got %s %v, want reject with 1 in 90 mm²", v, r)
	}
}

func TestCanonicalTellsLimitsApart(t *testing.T) {
	form := func(minCoverage float64, specs ...Spec) string {
		j, err := New(specs, minCoverage)
		if err != nil {
			t.Fatal(err)
		}
		return string(j.Canonical())
	}
	same := form(0.95, digSize)
	if form(0.95, digSize) != same {
		t.Error("equal limits have two forms")
	}
	for _, other := range []string{form(0.95, digKept), form(0.95, digSize, rimCount), form(0.9, digSize)} {
		if other == same {
			t.Errorf("other limits have the same form %s", same)
		}
	}
}

// A limit on slope takes dents of the kind that is told by slope, and no dig whose slope
// nobody measured.
func TestLimitOnSlope(t *testing.T) {
	e := evidence()
	e.Defects = append(e.Defects, pipeline.Defect{ID: 3, Kind: pipeline.Dent, View: "fringes", Zone: "clear", DiameterUM: 600, SlopeMrad: 2, Place: pipeline.Place{XPx: 80, YPx: 60}})
	steep := Spec{Name: "dent too steep", Each: "slope_mrad", AtMost: ptr(1), Unit: "mrad"}
	v, reasons := judge(t, e, steep)
	const want = "dent 3 at (80.0, 60.0) px of view fringes: slope_mrad is 2 mrad, at most 1 allowed (by +1)"
	if v != pipeline.Reject || len(reasons) != 1 || reasons[0].Name != "dent too steep" || reasons[0].DefectID != 3 || reasons[0].Over != 1 || reasons[0].Text != want {
		t.Errorf("got %s %+v, want a reject for %q", v, reasons, want)
	}
	steep.Kind = "dent"
	if v, _ := judge(t, e, steep); v != pipeline.Reject {
		t.Errorf("with kind dent: got %s", v)
	}
	steep.AtMost = ptr(2)
	if v, r := judge(t, e, steep); v != pipeline.Accept {
		t.Errorf("at the limit: got %s %v", v, r)
	}
}
