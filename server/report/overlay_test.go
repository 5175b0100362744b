package report

import (
	"bytes"
	"image/png"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Cells in which nothing is found, or too little, are hatched; others and those outside
// the region are not.
func TestBlindCellsAreHatched(t *testing.T) {
	p := raster.NewPlane(64, 16)
	m := &pipeline.CoverageMap{CellPx: 16, Columns: 4, Rows: 1, DigUM: []int{0, 40, 90, -1}, DigLimitUM: 60}
	var b bytes.Buffer
	if err := WriteOverlay(&b, []OverlayView{{Name: "", Frame: p, Coverage: m}}); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	for cell, want := range []bool{false, false, true, true} {
		hatched := false
		for y := range 16 {
			for x := range 16 {
				r, g, _, _ := img.At(16*cell+x, y).RGBA()
				hatched = hatched || r != g
			}
		}
		if hatched != want {
			t.Errorf("cell %d: hatched %v, want %v", cell, hatched, want)
		}
	}
}
