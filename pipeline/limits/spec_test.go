package limits

import (
	"errors"
	"strings"
	"testing"
)

func TestMistakes(t *testing.T) {
	for _, c := range []struct {
		spec Spec
		is   string
	}{
		{Spec{Each: "snr > 1"}, "limits[0].name: got \"\", want 1 to 64 characters: the name becomes the reason"},
		{Spec{Name: "a"}, "limits[0].name: got none, want exactly one of each, value and broken"},
		{Spec{Name: "a", Each: "snr > 1", Broken: "true"}, "limits[0].name: got each and broken, want exactly one of each, value and broken"},
		{Spec{Name: "a", Value: "1"}, "limits[0].value: no limit is given; add at_most or at_least"},
		{Spec{Name: "a", Broken: "true", AtMost: ptr(1), Unit: "um"}, "limits[0].broken: a condition has no at_most or at_least; use value"},
		{Spec{Name: "a", Each: "snr", AtMost: ptr(1)}, "limits[0].unit: not given; state the unit of the limit (um, um2, mm, 1 for a count)"},
		{Spec{Name: "a", Each: "snr", AtMost: ptr(1), AtLeast: ptr(2), Unit: "1"}, "limits[0].at_least: got 2, want no more than at_most"},
		{Spec{Name: "a", Each: "snr > 1", Kind: "pit"}, "limits[0].kind: got \"pit\", want one of dig, scratch, edge chip, stain, particle, fibre, dent, waviness"},
		{Spec{Name: "a", Each: "snr > 1", Verdict: "accept"}, "limits[0].verdict: got \"accept\", want reject or hold"},
		{Spec{Name: "a", Each: "snr > 1", Uncertainty: 2}, "limits[0].uncertainty: needs at_most or at_least"},
		{Spec{Name: "a", Each: "snr", AtMost: ptr(1), Unit: "1", Uncertainty: -2}, "limits[0].uncertainty: got -2, want 0 or more"},
		{Spec{Name: "a", Each: "snr", AtMost: ptr(1), Unit: "1", Uncertainty: 2, UncertaintyPercent: 1}, "limits[0].uncertainty_percent: uncertainty is given too; state one of the two"},
		{Spec{Name: "a", Each: "daimeter_um > 2"}, "limits[0].each:1:1: unknown name 'daimeter_um' (did you mean 'diameter_um'?)"},
		{Spec{Name: "a", Each: "diameter_um"}, "limits[0].each:1:1: the expression gives a number, want a condition (true or false)"},
		{Spec{Name: "a", Broken: "defects.size()"}, "limits[0].broken:1:1: the expression gives a number, want a condition (true or false)"},
	} {
		_, err := New([]Spec{c.spec}, 0)
		var all Mistakes
		if !errors.As(err, &all) || err.Error() != c.is {
			t.Errorf("%+v:\ngot  %v\nwant %s", c.spec, err, c.is)
		}
	}
}

func TestEveryMistakeAtOnce(t *testing.T) {
	_, err := New([]Spec{{Name: "a", Each: "snt > 1"}, {Name: "a", Each: "1 +", Kind: "pit"}}, 0)
	var all Mistakes
	if !errors.As(err, &all) || len(all) != 4 || all[3].Limit != 1 || !strings.Contains(all[3].Message, "earlier limit") {
		t.Errorf("got %v, want four mistakes, the last about the repeated name", err)
	}
}

func TestNoLimitsAndOddCoverage(t *testing.T) {
	if _, err := New(nil, 0); err == nil {
		t.Error("an empty list of limits was accepted")
	}
	for _, share := range []float64{-0.1, 1.1} {
		if _, err := New([]Spec{digSize}, share); err == nil {
			t.Errorf("min_coverage %v was accepted", share)
		}
	}
}
