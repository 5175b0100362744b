package yield

import (
	"reflect"
	"testing"
)

func TestCountReasonsOncePerUnit(t *testing.T) {
	got := CountReasons([][]string{
		{"scratch"},
		{"dig", "scratch", "dig"}, // a reason given twice on a unit counts once
		{},
		{"scratch", "coverage"},
	})
	want := []ReasonCount{{"coverage", 0, 1}, {"dig", 1, 1}, {"scratch", 2, 3}}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestPareto(t *testing.T) {
	given := []ReasonCount{{"coverage", 0, 1}, {"dig", 1, 1}, {"rim", 1, 2}, {"scratch", 2, 3}}
	rows := must[[]ParetoRow](t)(Pareto(given))
	want := []ParetoRow{
		{ReasonCount{"scratch", 2, 3}, 0.5, 0.5, 0.75},
		{ReasonCount{"rim", 1, 2}, 0.25, 0.75, 0.5},
		{ReasonCount{"dig", 1, 1}, 0.25, 1, 0.25},
		{ReasonCount{"coverage", 0, 1}, 0, 1, 0.25},
	}
	if !reflect.DeepEqual(rows, want) {
		t.Errorf("got %v, want %v", rows, want)
	}
	if given[0].Reason != "coverage" {
		t.Error("the caller's list was reordered")
	}
}

func TestParetoOfNothing(t *testing.T) {
	if rows := must[[]ParetoRow](t)(Pareto(nil)); len(rows) != 0 {
		t.Errorf("got %v", rows)
	}
}

func TestParetoRefuses(t *testing.T) {
	for name, counts := range map[string][]ReasonCount{
		"twice":          {{"dig", 1, 1}, {"dig", 1, 1}},
		"negative":       {{"dig", -1, 1}},
		"any below":      {{"dig", 2, 1}},
		"more than all":  {{"dig", 1, 5}, {"rim", 1, 1}},
		"none was first": {{"dig", 0, 1}},
	} {
		_, err := Pareto(counts)
		wantError(t, name, err)
	}
}
