package masters

import (
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

func rejected() pipeline.Judgement {
	return pipeline.Judgement{Verdict: pipeline.Reject, Reasons: []pipeline.Reason{{Name: "dig too large"}}}
}

func TestCompare(t *testing.T) {
	low, high := 190.0, 230.0
	dig := pipeline.MasterSpec{Unit: "M1", Expect: pipeline.Reject, View: "ring", Kind: pipeline.Dig, Measure: "diameter_um", Low: &low, High: &high}
	clean := pipeline.MasterSpec{Unit: "M0", Expect: pipeline.Accept}
	seen := func(kind pipeline.Kind, view string, um float64) pipeline.Evidence {
		return pipeline.Evidence{Defects: []pipeline.Defect{{Kind: kind, View: view, DiameterUM: um}}}
	}
	for name, c := range map[string]struct {
		m    pipeline.MasterSpec
		e    pipeline.Evidence
		j    pipeline.Judgement
		want ledger.CheckResult
		why  string
	}{
		"found":          {dig, seen(pipeline.Dig, "ring", 210), rejected(), ledger.CheckPass, "view ring found the dig"},
		"too small":      {dig, seen(pipeline.Dig, "ring", 180), rejected(), ledger.CheckFail, "diameter_um of its dig in view ring is 180, want at least 190"},
		"too large":      {dig, seen(pipeline.Dig, "ring", 231), rejected(), ledger.CheckFail, "want at most 230"},
		"accepted":       {dig, seen(pipeline.Dig, "ring", 210), pipeline.Judgement{Verdict: pipeline.Accept}, ledger.CheckFail, "the verdict is accept, expected was reject"},
		"other kind":     {dig, seen(pipeline.Scratch, "ring", 210), rejected(), ledger.CheckFail, "view ring found no dig"},
		"other view":     {dig, seen(pipeline.Dig, "bar", 210), rejected(), ledger.CheckFail, "view ring found no dig"},
		"no lamp":        {dig, pipeline.Evidence{}, pipeline.Judgement{Verdict: pipeline.Hold, Reasons: []pipeline.Reason{{Name: "not proven: light"}}}, ledger.CheckFail, "hold, expected was reject (not proven: light)"},
		"late":           {dig, pipeline.Evidence{Failures: []pipeline.Failure{{Reason: pipeline.ReasonLate, Detail: "spool"}}}, pipeline.Judgement{Verdict: pipeline.Hold}, ledger.CheckVoid, "late: spool"},
		"stage failed":   {dig, pipeline.Evidence{Failures: []pipeline.Failure{{Reason: pipeline.ReasonStageFailed}}}, pipeline.Judgement{Verdict: pipeline.Hold}, ledger.CheckFail, "the verdict is hold"},
		"clean":          {clean, pipeline.Evidence{}, pipeline.Judgement{Verdict: pipeline.Accept}, ledger.CheckPass, "accepted as expected"},
		"clean rejected": {clean, pipeline.Evidence{}, rejected(), ledger.CheckFail, "the verdict is reject, expected was accept (dig too large)"},
	} {
		got := Compare(c.m, c.e, c.j, nil)
		if got.Result != c.want || !strings.Contains(got.Why, c.why) {
			t.Errorf("%s: %s, %q; want %s with %q", name, got.Result, got.Why, c.want, c.why)
		}
	}
}

// After a merge the value is that of the master's own view, not of the view that saw the
// defect best; of two defects the larger one is meant.
func TestValueIsThatOfTheView(t *testing.T) {
	m := pipeline.MasterSpec{Expect: pipeline.Reject, View: "ring", Kind: pipeline.Dig, Measure: "peak_sigma"}
	e := pipeline.Evidence{
		Views: []pipeline.ViewEvidence{{Name: "ring", Defects: []pipeline.Defect{{ID: 1, View: "ring", PeakSigma: 7}, {ID: 2, View: "ring", PeakSigma: 9}}},
			{Name: "bar", Defects: []pipeline.Defect{{ID: 1, View: "bar", PeakSigma: 30}}}},
		Defects: []pipeline.Defect{
			{Kind: pipeline.Dig, View: "ring", PeakSigma: 7, MergedFrom: []pipeline.Ref{{View: "ring", ID: 1}}},
			{Kind: pipeline.Dig, View: "bar", PeakSigma: 30, SeenIn: []string{"bar", "ring"}, MergedFrom: []pipeline.Ref{{View: "bar", ID: 1}, {View: "ring", ID: 2}}},
		}}
	if got := Compare(m, e, rejected(), nil); got.Value == nil || *got.Value != 9 {
		t.Errorf("got %+v, want 9", got.Value)
	}
}
