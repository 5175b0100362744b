package configs

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
)

// spotSettings are those of a stage made for these tests.
type spotSettings struct {
	KLow  float64
	KHigh float64
	Sizes []int
}

func (s spotSettings) Check() error {
	if s.KLow > s.KHigh {
		return fmt.Errorf("k_low: got %g, want at most k_high (%g)", s.KLow, s.KHigh)
	}
	return nil
}

type spotStage struct {
	pipeline.Stage
	settings spotSettings
}

func catalogue(t *testing.T) *pipeline.Catalogue {
	t.Helper()
	build := func(s spotSettings, _ pipeline.Environment) (pipeline.Stage, error) {
		return spotStage{settings: s}, nil
	}
	defaults := spotSettings{KLow: 3.5, KHigh: 6, Sizes: []int{1, 2}}
	c, err := pipeline.NewCatalogue([]pipeline.Factory{
		pipeline.Make(pipeline.Factory{Type: "spots", Version: "1", Scope: pipeline.ScopeView}, defaults, build),
		pipeline.Make(pipeline.Factory{Type: "join", Version: "1", Scope: pipeline.ScopeUnit}, defaults, build),
	}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

const goodRecipe = `format: 1
part: D25-1
revision: B
min_coverage: 0.95
views:
  - name: ring
    light: ring
    calibration: none
    um_per_px: 10
    mirror: true
    stages:
      - type: spots
        k_low: 4
      - type: spots
  - name: bar
    rotation_deg: 90
    frames: 4
    stages: [{type: spots, sizes: [5]}]
unit:
  - type: join
limits:
  - name: dig size
    kind: dig
    each: diameter_um
    at_most: 200
    unit: um
  - name: many
    broken: defects.size() > 20
`

func TestRecipe(t *testing.T) {
	r, err := DecodeRecipe("d.yaml", []byte(goodRecipe), catalogue(t))
	if err != nil {
		t.Fatal(err)
	}
	if r.Part != "D25-1" || r.Revision != "B" || r.MaxAttempts != DefaultMaxAttempts || r.MinCoverage != 0.95 || r.Judge == nil ||
		r.TextHash != HashOf([]byte(goodRecipe)) || r.File != "d.yaml" || len(r.Unit) != 1 {
		t.Errorf("got %+v", r)
	}
	ring, bar := r.Views[0], r.Views[1]
	if !ring.NoCalibration || ring.UMPerPx != 10 || !ring.Mirror || ring.Frames != 1 || len(ring.Stages) != 2 {
		t.Errorf("ring: got %+v", ring)
	}
	if bar.NoCalibration || bar.RotationDeg != 90 || bar.Frames != 4 {
		t.Errorf("bar: got %+v", bar)
	}
	if s := ring.Stages[0]; s.Where != "d.yaml:12:9" || s.Locate("k_low") != "d.yaml:13:16" {
		t.Errorf("stage at %s, its k_low at %s; want 12:9 and 13:16", s.Where, s.Locate("k_low"))
	}
}

func TestStageSettingsAreLaidOverDefaults(t *testing.T) {
	c := catalogue(t)
	r, err := DecodeRecipe("d.yaml", []byte(goodRecipe), c)
	if err != nil {
		t.Fatal(err)
	}
	f, err := c.Factory("spots")
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []string{"{4 6 [1 2]}", "{3.5 6 [1 2]}"} {
		_, used, err := f.New(r.Views[0].Stages[i].Decode, pipeline.Environment{})
		if got := fmt.Sprint(used); err != nil || got != want {
			t.Errorf("stage %d: got %s, %v; want %s", i, got, err, want)
		}
	}
	_, used, _ := f.New(r.Views[1].Stages[0].Decode, pipeline.Environment{})
	if got := fmt.Sprint(used, f.Defaults); got != "{3.5 6 [5]} {3.5 6 [1 2]}" {
		t.Errorf("got %s: a list in the file must replace the default's and leave it alone", got)
	}
}

func TestRecipeBuildsAPipeline(t *testing.T) {
	r, err := DecodeRecipe("d.yaml", []byte(strings.Replace(goodRecipe, "rotation_deg: 90", "calibration: none\n    um_per_px: 8", 1)), nil)
	if err != nil {
		t.Fatal(err)
	}
	p, err := pipeline.Build(r, catalogue(t), pipeline.Options{})
	if err != nil || strings.Join(p.Views(), " ") != "ring bar" {
		t.Errorf("got %v, %v", p, err)
	}
}

// Each change to the good recipe gives one problem, at its place.
func TestRecipeProblems(t *testing.T) {
	for _, c := range []struct{ from, to, is string }{
		{"part: D25-1\n", "", `d.yaml:1:1: part: got "", want 1 to 64 characters of A-Z a-z 0-9 . _ - and no leading dot`},
		{"part: D25-1", "part: ../D25", `d.yaml:2:7: part: got "../D25", want 1 to 64 characters of A-Z a-z 0-9 . _ - and no leading dot`},
		{"min_coverage: 0.95\n", "", "d.yaml:1:1: min_coverage: the key is missing, want the share of the region that must be inspected, such as 0.95"},
		{"0.95", "95", "d.yaml:4:15: min_coverage: got 95, want a share from 0 to 1"},
		{"name: bar", "name: ring", `d.yaml:15:11: views[1].name: "ring" names an earlier view too, want a name of its own for every view`},
		{"calibration: none", "calibration: non", `d.yaml:8:18: views[0].calibration: got "non", want required or none`},
		{"    um_per_px: 10\n", "", "d.yaml:6:5: views[0].um_per_px: no scale is given and no calibration has one, want µm per pixel"},
		{"frames: 4", "frames: 65", "d.yaml:17:13: views[1].frames: got 65, want 1 to 64"},
		{"type: spots\n        k_low: 4", "type: spts\n        k_low: 4", `d.yaml:12:15: views[0].stages[0].type: there is no stage type "spts" (did you mean "spots"?), want one of join, spots`},
		{"type: join", "type: spots", `d.yaml:20:11: unit[0].type: stage "spots" works on one view, want it among the view stages`},
		{"- type: spots\n        k_low: 4", "- k_low: 4", "d.yaml:12:9: views[0].stages[0]: the stage has no type, want type: and one of join, spots"},
		{"- type: join", "- join", "d.yaml:20:5: unit[0]: got join, want keys with values"},
		{"k_low: 4", "k_lwo: 4", `d.yaml:13:9: views[0].stages[0]: unknown key "k_lwo" (did you mean "k_low"?), want one of k_low, k_high, sizes`},
		{"k_low: 4", "k_low: 9", "d.yaml:13:16: views[0].stages[0].k_low: got 9, want at most k_high (6)"},
		{"k_low: 4", "k_low: four", "d.yaml:13:16: views[0].stages[0].k_low: got four, want a finite number"},
		{"each: diameter_um", "each: daimeter_um", "d.yaml:24:11: limits[0].each: unknown name 'daimeter_um' (did you mean 'diameter_um'?)"},
		{"broken: defects.size() > 20", "broken: 'defects.size() > 20 && snt > 1'", "d.yaml:28:37: limits[1].broken: unknown name 'snt' (did you mean 'snr'?)"},
		{"broken: defects.size() > 20", "broken: |\n      true &&\n        snt > 1", "d.yaml:30:9: limits[1].broken: unknown name 'snt' (did you mean 'snr'?)"},
		{"name: many", "name: dig size", `d.yaml:27:11: limits[1].name: "dig size" names an earlier limit too; every limit needs a name of its own`},
		{"kind: dig", "kind: dog", `d.yaml:23:11: limits[0].kind: got "dog", want one of dig, scratch`},
		{"limits:\n", "limits: []\nold:\n", `d.yaml:22:1: unknown key "old", want one of part`},
	} {
		text := strings.Replace(goodRecipe, c.from, c.to, 1)
		if text == goodRecipe {
			t.Fatalf("%q is not in the recipe", c.from)
		}
		_, err := DecodeRecipe("d.yaml", []byte(text), catalogue(t))
		var all Problems
		if !errors.As(err, &all) || len(all) != 1 || !strings.HasPrefix(err.Error(), c.is) {
			t.Errorf("%q for %q:\ngot  %v\nwant %s", c.to, c.from, err, c.is)
		}
	}
}

func TestRecipeWithoutViewsOrLimits(t *testing.T) {
	_, err := DecodeRecipe("d.yaml", []byte("format: 1\npart: D25-1\nmin_coverage: 1\n"), nil)
	var all Problems
	if !errors.As(err, &all) || len(all) != 2 {
		t.Errorf("got %v, want a problem about views and one about limits", err)
	}
}

func TestLoadRecipe(t *testing.T) {
	path := filepath.Join(t.TempDir(), "d.yaml")
	if err := os.WriteFile(path, []byte(goodRecipe), 0o600); err != nil {
		t.Fatal(err)
	}
	if r, err := LoadRecipe(path, catalogue(t)); err != nil || r.File != path {
		t.Errorf("got %+v, %v", r, err)
	}
	if _, err := LoadRecipe(path+"x", nil); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("missing file: got %v", err)
	}
}

// A limit on edge chips without a view that follows the edge would never be broken.
func TestChipLimitNeedsAnEdge(t *testing.T) {
	chip := goodRecipe + "\n  - {name: chip, kind: edge chip, each: reach_um, at_most: 200, unit: um}\n"
	if _, err := DecodeRecipe("d.yaml", []byte(chip), nil); err == nil || !strings.Contains(err.Error(), `limit "chip": no view shows the part's edge`) {
		t.Errorf("got %v", err)
	}
	r, err := DecodeRecipe("d.yaml", []byte(strings.NewReplacer("um_per_px: 10", "um_per_px: 50", "    stages:\n", "    stages:\n      - {type: edge}\n").Replace(chip)), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, cals := range []map[string]*pipeline.Calibration{nil, {"ring": {PartEdge: &pipeline.PartEdge{WidthPx: 3}}}} {
		w := CheckOptics(r, cals)
		if len(w) != 1 || w[0].Name != "chip" || w[0].Refuse || !strings.Contains(w[0].Text, "4.0 px of view ring (50 um/px)") {
			t.Errorf("got %+v, want one warning, that 200 um are 4 px; the scale of the other view is not known", w)
		}
	}
}
