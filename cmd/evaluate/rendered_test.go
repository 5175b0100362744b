package main

import (
	"io"
	"path/filepath"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/blobs"
)

// The figures of the whole run, on a few frames and with room for chance. The scene is
// the committed one but for fewer calibration frames.
func TestRendered(t *testing.T) {
	o := options{testdata: filepath.Join("..", "..", "testdata"), frames: 12}
	whole, err := newTrial(o, func(s *render.Scene) { s.Calibration = render.CalibrationFrames{Dark: 5, Stray: 3, Response: 5} })
	if err != nil {
		t.Fatal(err)
	}
	defer whole.line.Close()
	t.Run("detection", func(t *testing.T) { detects(t, whole, o.frames) })
	t.Run("blind recipe", func(t *testing.T) { seesBlindness(t, whole, o) })
	t.Run("plain chain", func(t *testing.T) {
		plain, err := whole.plainUnits(1)
		if err != nil || mean(plain) < 3 {
			t.Errorf("a plain chain finds %v defects that are not there (%v), want at least 3", plain, err)
		}
	})
	if whole.onObject(pipeline.Defect{Box: pipeline.Box{X0: 10, Y0: 10, X1: 12, Y1: 12}}, nil) {
		t.Error("a defect lies on an object where none was drawn")
	}
}

func detects(t *testing.T, whole *trial, frames int) {
	var shown [3][]inspected
	for i, n := range []int{frames, 3, 3} {
		var err error
		if shown[i], err = whole.units(n, []condition{asDrawn, dimLamp, strongLamp}[i], io.Discard); err != nil {
			t.Fatal(err)
		}
	}
	r := &result{}
	if err := r.detection(shown[0], frames); err != nil {
		t.Fatal(err)
	}
	r.sizes(shown[0], shown[1], shown[2])
	for _, q := range r.Requirements {
		if !q.Met {
			t.Errorf("%s: got %s, want %s", q.Name, q.Got, q.Want)
		}
	}
	falses := 0
	for _, u := range shown[0] {
		falses += u.falses
	}
	if falses > 1 {
		t.Errorf("%d defects where nothing was drawn on %d frames, want at most 1", falses, frames)
	}
}

// seesBlindness checks that the same measures say so when a recipe misses faint digs.
func seesBlindness(t *testing.T, whole *trial, o options) {
	recipe, cat, err := loadRecipe(o, "detect")
	if err != nil {
		t.Fatal(err)
	}
	for i, s := range recipe.Views[0].Stages {
		if s.Type == blobs.Factory.Type {
			recipe.Views[0].Stages[i].Decode = func(dst any) error { dst.(*blobs.Settings).KHigh = 80; return nil }
		}
	}
	line, err := build(recipe, cat, whole.line.Calibrations(), false)
	if err != nil {
		t.Fatal(err)
	}
	defer line.Close()
	units, err := (&trial{renderer: whole.renderer, line: line, view: whole.view}).units(2, asDrawn, io.Discard)
	if err != nil {
		t.Fatal(err)
	}
	r := &result{}
	if err := r.detection(units, 2); err != nil {
		t.Fatal(err)
	}
	for _, q := range r.Requirements {
		if q.Name == "share of digs found" && q.Met {
			t.Errorf("a recipe with k_high 80 finds a share of %s", q.Got)
		}
	}
}
