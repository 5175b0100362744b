package main

import (
	"reflect"
	"slices"
	"strings"
	"testing"

	"lapgate/pipeline"
)

func TestPattern(t *testing.T) {
	for _, c := range []struct {
		pattern, name string
		want          pipeline.FrameHeader
	}{
		{"{unit}_{view}", "frames/U_1_ring.pgm", pipeline.FrameHeader{Identity: pipeline.Identity{Unit: "U_1"}, View: "ring"}},
		{"{unit}_{view}.pgm", "U1_bar.pgm", pipeline.FrameHeader{Identity: pipeline.Identity{Unit: "U1"}, View: "bar"}},
		{"{line}/{lot}/{unit}-a{attempt}_{view}_{index}of{count}.tif", "/x/A/L1/U1-a2_ring_03of16.tif",
			pipeline.FrameHeader{Identity: pipeline.Identity{Line: "A", Lot: "L1", Unit: "U1", Attempt: 2}, View: "ring", Index: 3, Count: 16}},
		{"{_}.{unit}.{tag.tool}.{view}", "what ever.U1.7.ring.png", pipeline.FrameHeader{Identity: pipeline.Identity{Unit: "U1"}, View: "ring", Tags: map[string]string{"tool": "7"}}},
		{"{frame_counter}_{purpose}", "18446744073_study.raw", pipeline.FrameHeader{Identity: pipeline.Identity{Purpose: pipeline.Study}, FrameCounter: 18446744073}},
		{"(+){unit}[", "(+)U1[.pgm", pipeline.FrameHeader{Identity: pipeline.Identity{Unit: "U1"}}},
	} {
		p, err := parsePattern(c.pattern)
		if err != nil {
			t.Errorf("%s: %v", c.pattern, err)
			continue
		}
		var got pipeline.FrameHeader
		if err := p.apply(c.name, &got); err != nil || !reflect.DeepEqual(got, c.want) {
			t.Errorf("%s on %s: got %+v (%v), want %+v", c.pattern, c.name, got, err, c.want)
		}
	}
}

func TestPatternRefusals(t *testing.T) {
	for text, want := range map[string]string{
		"{unit}{view}":       "cannot be told apart",
		"{unit}_{unit}":      "stands twice",
		"{serial}":           "got field {serial}, want one of",
		"{unit":              "{ without }",
		"unit}":              "} without {",
		"{unit}_{view}_x}.y": "} without {",
	} {
		if _, err := parsePattern(text); err == nil || !strings.Contains(err.Error(), want) || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: got %v, want %q", text, err, want)
		}
	}
	p, err := parsePattern("{unit}_{index}")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"U1.pgm", "U1_x.pgm", "U1_99999999999.pgm", "../U 1_1.pgm"} {
		if err := p.apply(name, &pipeline.FrameHeader{}); err == nil {
			t.Errorf("%s was taken", name)
		}
	}
}

// FuzzPattern writes a name by the pattern and reads it back: no pattern may crash,
// and what it reads must be written in the name.
func FuzzPattern(f *testing.F) {
	f.Add("{line}/{unit}_{view}.pgm", "A/U1_ring.pgm")
	f.Add("{unit}_{view}", "U1_ring.tif")
	f.Add("{{}}", "x")
	f.Fuzz(func(t *testing.T, text, name string) {
		p, err := parsePattern(text)
		if err != nil {
			return
		}
		var h pipeline.FrameHeader
		if err := p.apply(name, &h); err != nil {
			return
		}
		for field, value := range map[string]string{"unit": h.Unit, "view": h.View, "line": h.Line, "lot": h.Lot} {
			if slices.Contains(p.fields, field) && (value == "" || strings.Contains(value, "/") || !strings.Contains(name, value)) {
				t.Errorf("pattern %q read %s = %q from %q", text, field, value, name)
			}
		}
	})
}

func TestSplitArguments(t *testing.T) {
	got, err := splitArguments(`eject --lane 'lane 1' "" a"b c"d`)
	if want := []string{"eject", "--lane", "lane 1", "", "ab cd"}; err != nil || !slices.Equal(got, want) {
		t.Errorf("got %q (%v), want %q", got, err, want)
	}
	for _, wrong := range []string{"", "  ", "eject 'x"} {
		if _, err := splitArguments(wrong); err == nil {
			t.Errorf("%q was taken", wrong)
		}
	}
}
