package main

import (
	"os/exec"
	"strings"
	"testing"
	"time"
)

// All methods find the same objects of a smaller scene as SEP, but for a few at the threshold.
func TestComparedMethodsFindTheSame(t *testing.T) {
	if err := exec.Command("/usr/bin/python3", "-c", "import cv2, sep, numpy").Run(); err != nil {
		t.Skip("needs Debian's python3-opencv, python3-sep and python3-numpy")
	}
	s := drawScene(1600, 1200)
	outside, err := startScript("../../testdata/compare/compare.py", s)
	if err != nil {
		t.Fatal(err)
	}
	defer outside.stop()
	methods, closing, err := ourMethods(s)
	if err != nil {
		t.Fatal(err)
	}
	defer closing()
	table, err := inTurns(append(methods, outside.methods()...), 1)
	if err != nil {
		t.Fatal(err)
	}
	want := table[len(table)-1].Objects
	for _, c := range table {
		if want < 20 || c.Common < want-2 || c.Objects > want+2 || c.ClockMS <= 0 || c.CPUMS <= 0 {
			t.Errorf("%s: %+v, want about the %d objects of SEP", c.Method, c, want)
		}
	}
	if !strings.Contains(outside.versions, "OpenCV 4") {
		t.Errorf("versions %q", outside.versions)
	}
}

func TestTabulate(t *testing.T) {
	ms := func(n int) time.Duration { return time.Duration(n) * time.Millisecond }
	methods := []method{{name: fusedName, threads: 1}, {name: pythonTuned, threads: 2}, {name: sepName, threads: 1}}
	table := tabulate(methods, []pair{{ms(5), ms(4)}, {ms(50), ms(90)}, {ms(400), ms(396)}},
		[][]centre{{{1, 1}, {9, 9}, {1.2, 1}}, {{1, 2.4}}, {{1, 1}, {20, 20}}})
	if table[0].Common != 1 || table[0].Objects != 3 || table[1].Common != 1 || table[2].Common != 2 {
		t.Errorf("in common: %+v", table)
	}
	if table[1].Times != 10 || table[2].Times != 99 {
		t.Errorf("two threads by the clock: %g times, want 10; one by CPU time: %g, want 99", table[1].Times, table[2].Times)
	}
	var w strings.Builder
	printCompared(&w, table, 3, "versions")
	for _, want := range []string{"required 10, aim 20: required reached, aim missed", "required 40, aim 80: reached"} {
		if !strings.Contains(w.String(), want) {
			t.Errorf("%s\nwant %q in it", w.String(), want)
		}
	}
}
