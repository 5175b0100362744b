package volume

import (
	"strings"
	"testing"

	"lapgate/server/volume/plan"
)

const thresholdTable = `setting,misses,nonconforming,false_rejects,conforming
12,0,80,90,400
14,1,80,40,400
16,3,80,14,400
18,7,80,5,400
20,14,80,2,400
22,26,80,1,400
`

func withThreshold(t *testing.T, limit float64) *plan.Plan {
	t.Helper()
	p := twoWays()
	rows, err := plan.ReadThresholds(strings.NewReader(thresholdTable))
	if err != nil {
		t.Fatal(err)
	}
	p.Threshold = &plan.Threshold{File: "t.csv", Process: "a", Inspection: "all", Quantity: 5000, DrawingLimit: limit, Unit: "um", Rows: rows}
	return p
}

// The cost at a setting is that of a plan with those misses and false rejects.
func TestThresholdCostsAreThoseOfThePlan(t *testing.T) {
	r := evaluate(t, withThreshold(t, 20)).Threshold
	for _, s := range r.Settings {
		p := twoWays()
		p.Inspections[0].Miss = count(s.Misses, s.Nonconforming)
		p.Inspections[0].FalseReject = count(s.FalseRejects, s.Conforming)
		near(t, "cost", float64(s.Cost), curvesOf(t, p)[0].PerGood(5000), 1e-9)
		if !(s.Low <= s.Cost && s.Cost <= s.High) {
			t.Errorf("setting %v: %v outside %v..%v", s.Setting, s.Cost, s.Low, s.High)
		}
	}
	if best := r.Settings[r.Best]; r.Low > best.Setting || r.High < best.Setting {
		t.Errorf("interval %v..%v leaves out %v", r.Low, r.High, best.Setting)
	}
}

func TestDrawingLimitStaysBinding(t *testing.T) {
	free := evaluate(t, withThreshold(t, 22)).Threshold
	bound := evaluate(t, withThreshold(t, 14)).Threshold
	if free.Best != free.BestAllowed {
		t.Error("a loose limit binds")
	}
	if bound.Settings[bound.BestAllowed].Setting != 14 || bound.Settings[bound.Best].Setting != free.Settings[free.Best].Setting {
		t.Errorf("best %d, allowed %d", bound.Best, bound.BestAllowed)
	}
	if evaluate(t, withThreshold(t, 5)).Threshold.BestAllowed != -1 {
		t.Error("a setting looser than the drawing was allowed")
	}
}

func TestThresholdTablesWithMistakes(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"a,b\n", "line 1: header"},
		{strings.Replace(thresholdTable, "16,3", "x,3", 1), `line 4: setting "x"`},
		{strings.Replace(thresholdTable, "16,3", "13,3", 1), "does not rise"},
		{strings.Replace(thresholdTable, "16,3", "16,0", 1), "opposite ways"},
		{strings.Replace(thresholdTable, "3,80", "3,81", 1), "same units"},
		{strings.Replace(thresholdTable, "3,80", "99,80", 1), "more misses"},
	} {
		if _, err := plan.ReadThresholds(strings.NewReader(c.text)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got %v, want %q", err, c.want)
		}
	}
}
