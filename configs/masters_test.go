package configs

import (
	"reflect"
	"strings"
	"testing"

	"lapgate/pipeline"
)

const masterRecipe = `format: 1
part: disc
min_coverage: 0.9
views:
  - {name: ring, calibration: none, um_per_px: 10, stages: [{type: blobs}]}
limits:
  - {name: dig too large, each: diameter_um, at_most: 60, unit: um}
masters:
`

func TestMastersOfARecipe(t *testing.T) {
	r, err := DecodeRecipe("disc.yaml", []byte(masterRecipe+`  - {unit: M-CLEAN, expect: accept, every_minutes: 480}
  - {unit: M-DIG, expect: reject, view: ring, kind: dig, measure: peak_sigma, at_least: 8, due_at: ["22:00", "06:00", "14:00"], grace_minutes: 10}
`), nil)
	if err != nil {
		t.Fatal(err)
	}
	low := 8.0
	want := []pipeline.MasterSpec{{Unit: "M-CLEAN", Expect: pipeline.Accept, EveryMinutes: 480},
		{Unit: "M-DIG", Expect: pipeline.Reject, View: "ring", Kind: pipeline.Dig, Measure: "peak_sigma", Low: &low, DueAt: []int{360, 840, 1320}, GraceMinutes: 10}}
	if !reflect.DeepEqual(r.Masters, want) {
		t.Errorf("got %+v\nwant %+v", r.Masters, want)
	}
	if _, ok := (pipeline.Defect{}).Measured(r.Masters[1].Measure); !ok {
		t.Error("a measure that recipes may name cannot be measured")
	}
}

func TestMastersThatCannotBe(t *testing.T) {
	for _, c := range []struct{ text, is string }{
		{"{unit: M, expect: hold, every_minutes: 9}", `disc.yaml:9:23: masters[0].expect: got "hold", want accept or reject`},
		{"{unit: M, expect: accept}", "masters[0]: nothing says when the master is due"},
		{"{unit: M, expect: accept, kind: dig, every_minutes: 9}", "masters[0]: a master that must be accepted has no defect to find"},
		{"{unit: M, expect: reject, view: bar, kind: dig, every_minutes: 9}", `masters[0].view: got "bar", want one of ring`},
		{"{unit: M, expect: reject, view: ring, kind: dint, every_minutes: 9}", `masters[0].kind: got "dint", want one of dig`},
		{"{unit: M, expect: reject, view: ring, kind: dig, measure: depth, every_minutes: 9}", `masters[0].measure: got "depth"`},
		{"{unit: M, expect: reject, view: ring, kind: dig, at_least: 5, at_most: 4, every_minutes: 9}", "masters[0].at_least: it lies above at_most"},
		{`{unit: M, expect: accept, due_at: ["6 am"]}`, `masters[0].due_at[0]: got "6 am", want a time of day`},
		{"{unit: a b, expect: accept, every_minutes: 9}", `masters[0].unit: got "a b"`},
		{"{unit: M, expect: accept, every_minutes: -1}", "masters[0].every_minutes: got -1"},
		{"{unit: M, expect: accept, every_minutes: 9}\n  - {unit: M, expect: accept, every_minutes: 9}", `masters[1].unit: "M" names an earlier master too`},
	} {
		_, err := DecodeRecipe("disc.yaml", []byte(masterRecipe+"  - "+c.text+"\n"), nil)
		if err == nil || !strings.Contains(err.Error(), c.is) {
			t.Errorf("%s:\ngot  %v\nwant %s", c.text, err, c.is)
		}
	}
}
