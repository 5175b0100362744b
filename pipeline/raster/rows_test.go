package raster_test

import (
	"math/rand/v2"
	"slices"
	"testing"

	"lapgate/pipeline/raster"
)

// Spans that overlap, touch, are empty, in any order and off the picture give what a mask
// filled with them gives.
func TestRowsAreTheMask(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	for range 50 {
		const width, height = 40, 12
		var spans []raster.Span
		for range rng.IntN(60) {
			x := rng.IntN(60) - 10
			spans = append(spans, raster.Span{Y: rng.IntN(18) - 3, X0: x, X1: x + rng.IntN(15) - 2})
		}
		before := slices.Clone(spans)
		rows := raster.NewRows(spans, width, height)
		mask := raster.NewMask(width, height)
		mask.FillSpans(spans)
		if !slices.Equal(rows.Spans(), mask.Spans()) || rows.Count() != mask.Count() || !slices.Equal(spans, before) {
			t.Fatalf("spans %v give %v, want %v", spans, rows.Spans(), mask.Spans())
		}
		for y := -2; y < height+2; y++ {
			for x := -2; x < width+2; x++ {
				if rows.At(x, y) != mask.At(x, y) {
					t.Fatalf("(%d, %d) of %v: %v", x, y, rows.Spans(), rows.At(x, y))
				}
			}
		}
	}
	if (raster.Rows{}).At(0, 0) {
		t.Error("an empty set has a pixel")
	}
}
