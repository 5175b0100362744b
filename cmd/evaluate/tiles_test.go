package main

import (
	"image"
	"image/color"
	"image/png"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"lapgate/pipeline"
)

// drawTile writes a picture of even grey with noise. Hot is the level of a patch of 20 × 20
// pixels, hole that of one of 7 × 7.
func drawTile(t *testing.T, path string, hot, hole uint8) {
	t.Helper()
	r := rand.New(rand.NewPCG(7, 9))
	img := image.NewGray(image.Rect(0, 0, 400, 380))
	for y := range 380 {
		for x := range 400 {
			v := 120 + 4*r.NormFloat64()
			switch {
			case x >= 300 && x < 320 && y >= 100 && y < 120:
				v = float64(hot)
			case x >= 140 && x < 147 && y >= 240 && y < 247:
				v = float64(hole)
			}
			img.SetGray(x, y, color.Gray{Y: uint8(v)})
		}
	}
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if err := png.Encode(f, img); err != nil {
		t.Fatal(err)
	}
}

// The product's rule: more than pipeline.SaturatedShare of the region saturated is a reason
// to hold, so that the unit is never accepted; what was found is still found.
func TestSaturatedTileIsNeverAccepted(t *testing.T) {
	o := options{testdata: filepath.Join("..", "..", "testdata")}
	recipe, cat, err := loadRecipe(o, tilesName)
	if err != nil {
		t.Fatal(err)
	}
	set := &tileSet{dir: t.TempDir(), recipe: recipe}
	if set.blobs, err = blobSettings(recipe.Views[0]); err != nil {
		t.Fatal(err)
	}
	if set.line, err = build(recipe, cat, nil, true); err != nil {
		t.Fatal(err)
	}
	defer set.line.Close()
	if err := os.Mkdir(filepath.Join(set.dir, "images"), 0o755); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name      string
		hot, hole uint8
		want      pipeline.Verdict
		held      bool
	}{
		{"clean", 120, 120, pipeline.Accept, false},
		{"bright", 254, 120, pipeline.Accept, false},
		{"saturated", 255, 120, pipeline.Hold, true},
		{"hole", 120, 20, pipeline.Reject, false},
		{"hole and saturated", 255, 20, pipeline.Reject, true},
	} {
		file := c.name + ".png"
		drawTile(t, filepath.Join(set.dir, "images", file), c.hot, c.hole)
		got, err := set.tile(picture{file: file, class: "Free"})
		if err != nil {
			t.Fatal(err)
		}
		if held := slices.Equal(got.holds, []string{pipeline.ReasonSaturated}); got.verdict[digs] != c.want || held != c.held {
			t.Errorf("%s: got %s with reasons to hold %v, want %s and saturated %v", c.name, got.verdict[digs], got.holds, c.want, c.held)
		}
	}
}

func TestJudgeBy(t *testing.T) {
	short := func(f found) bool { return f.lengthPx <= 40 }
	x := tile{truth: 30, found: []found{{peakSigma: 50, lengthPx: 90, marked: 99}, {peakSigma: 8, lengthPx: 5, marked: 20, both: 15}}}
	x.judgeBy(digs, 7.5, short)
	if x.verdict[digs] != pipeline.Reject || x.top[digs] != 8 || x.score[digs] != (pixelScore{both: 15, marked: 20, truth: 30}) {
		t.Errorf("got %s, top %g, %+v", x.verdict[digs], x.top[digs], x.score[digs])
	}
	x.judgeBy(digs, 8, short)
	if x.verdict[digs] != pipeline.Accept || x.score[digs] != (pixelScore{truth: 30}) {
		t.Errorf("at the limit got %s, %+v", x.verdict[digs], x.score[digs])
	}
	x.holds = []string{pipeline.ReasonSaturated}
	x.judgeBy(digs, 8, short)
	if x.verdict[digs] != pipeline.Hold || len(judgeable([]tile{x})) != 0 {
		t.Errorf("with a reason to hold got %s", x.verdict[digs])
	}
}

func TestCountExposures(t *testing.T) {
	shown := func(verdicts ...pipeline.Verdict) []tile {
		out := make([]tile, len(verdicts))
		for i, v := range verdicts {
			out[i].verdict[digs] = v
		}
		return out
	}
	const a, r, h = pipeline.Accept, pipeline.Reject, pipeline.Hold
	got := countExposures([][]tile{shown(r, r), shown(r, h, h), shown(h, h), shown(a, r), shown(a, a, a), shown(r)}, digs)
	want := overExposures{tiles: 5, constant: 3, neverAccepted: 3, alwaysRejected: 1, everRejected: 3, alwaysAccepted: 1}
	if got != want {
		t.Errorf("got %+v, want %+v: one picture is no row of exposures", got, want)
	}
}

// crossList has two defective and three clean groups.
func crossList() []picture {
	var out []picture
	for _, g := range []string{"A", "B"} {
		out = append(out, picture{class: "Blowhole", group: g}, picture{class: "Blowhole", group: g})
	}
	for _, g := range []string{"F", "G", "H"} {
		out = append(out, picture{class: "Free", group: g}, picture{class: "Free", group: g})
	}
	return out
}

func TestFoldsLeaveEachGroupOutOnce(t *testing.T) {
	folds := foldsOf(crossList())
	if len(folds) != 2 || !slices.Equal(folds[0].names(), []string{"A", "F", "H"}) || !slices.Equal(folds[1].names(), []string{"B", "G"}) {
		t.Errorf("got %v", folds)
	}
}

// Group A's holes show with a grid of 28 alone, B's with one of 56 alone: the choice without
// A is 56, with which A is missed. A choice that saw A could not be so wrong.
func TestLeftOutIsNotSeenByTheChoice(t *testing.T) {
	shows := map[string]int{"A": 28, "B": 56}
	inspect := func(_, grid int, _ float64) ([]tile, error) {
		var out []tile
		for _, p := range crossList() {
			x := tile{picture: p, found: []found{{peakSigma: 5, lengthPx: 9, marked: 4}}}
			if shows[p.group] == grid {
				x.found[0].peakSigma, x.truth, x.found[0].both = 20, 4, 4
			}
			if p.group == "F" {
				x.found[0].peakSigma = 19
			}
			out = append(out, x)
		}
		return out, nil
	}
	f := foldsOf(crossList())[0]
	got, c, err := f.leftOut(inspect)
	if err != nil || c.gridPx != 56 || c.limit != 5 {
		t.Fatalf("chosen %+v, %v: want grid 56 and limit 5, since F with its 19 sigma is left out", c, err)
	}
	for _, x := range got {
		want := map[string]pipeline.Verdict{"A": pipeline.Accept, "F": pipeline.Reject, "H": pipeline.Accept}[x.group]
		if x.verdict[digs] != want {
			t.Errorf("group %s: got %s, want %q", x.group, x.verdict[digs], want)
		}
	}
	if len(got) != 6 {
		t.Errorf("got %d pictures, want those of A, F and H", len(got))
	}
}

func TestSettingsAreInspectedOnce(t *testing.T) {
	runs := 0
	of := remembered(func(int, int, float64) ([]tile, error) { runs++; return nil, nil })
	for _, low := range []float64{3, 3, 4, 3} {
		if _, err := of(7, 40, low); err != nil {
			t.Fatal(err)
		}
	}
	if runs != 2 {
		t.Errorf("got %d runs, want 2", runs)
	}
}
