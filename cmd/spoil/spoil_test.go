package main

import (
	"bytes"
	"io"
	"path/filepath"
	"strings"
	"testing"
)

// A short run of the whole suite: nothing spoiled is accepted, every cause is named, and
// what is right passes. Two of each with -short, eight without.
func TestNothingSpoiledIsAccepted(t *testing.T) {
	units := 8 // about 40 s of one core
	if testing.Short() {
		units = 2
	}
	var table bytes.Buffer
	if err := run(options{dir: filepath.Join("..", "..", "testdata", "spoil"), units: units, workers: 2}, &table, io.Discard); err != nil {
		t.Errorf("%v\n%s", err, table.String())
	}
	for _, f := range faults() {
		if !strings.Contains(table.String(), f.name) {
			t.Errorf("the table has no line for %s", f.name)
		}
	}
}

// The suite's own judgement can fail.
func TestJudgeOfTheTable(t *testing.T) {
	good := []result{{Fault: "cap", Units: 5, Held: 4, Rejected: 1, Named: 5}, {Fault: "nothing", Units: 200, Held: 2, passes: true}}
	if err := judge(good); err != nil {
		t.Error(err)
	}
	for want, r := range map[string]result{
		"1 of 5 accepted":  {Fault: "cap", Units: 5, Accepted: 1, Held: 4, Named: 5},
		"named for 4 of 5": {Fault: "cap", Units: 5, Held: 5, Named: 4},
		"3 of 200 held":    {Fault: "nothing", Units: 200, Held: 3, passes: true},
	} {
		if err := judge([]result{r}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

func TestUnknownFault(t *testing.T) {
	b := &bench{}
	if _, err := b.showAll(options{only: "rain"}, io.Discard); err == nil || !strings.Contains(err.Error(), "lamp at 0 %") {
		t.Errorf("got %v", err)
	}
}
