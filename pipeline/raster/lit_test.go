package raster

import (
	"math"
	"testing"
)

// A part of 80 × 60 px with a black hole and a hole at its edge, on dark surroundings with a
// bright speck: the hole is of the part, the notch and the speck are not.
func TestLitPart(t *testing.T) {
	p := noisy(200, 160, 8, 1, 9)
	paint := func(x0, y0, x1, y1 int, v float32) {
		for y := y0; y < y1; y++ {
			for x := x0; x < x1; x++ {
				p.Set(x, y, v)
			}
		}
	}
	paint(60, 50, 140, 110, 100)
	paint(95, 75, 105, 85, 3)  // a hole
	paint(130, 70, 140, 90, 3) // a notch
	paint(10, 10, 18, 18, 200) // a speck
	part := LitPart(p, 0.5)
	if got := float64(part.Count()); math.Abs(got-(80*60-10*20)) > 40 {
		t.Errorf("the part has %g px, want 4600", got)
	}
	if !part.At(100, 80) || part.At(136, 80) || part.At(14, 14) || part.At(59, 80) || !part.At(60, 80) {
		t.Error("want the hole inside; notch, speck and surroundings outside; the edge at half height")
	}
}

// A part that fills the frame goes to its edges; a frame of one level shows no part.
func TestLitPartOverAllAndNothing(t *testing.T) {
	if n := LitPart(noisy(64, 48, 100, 3, 2), 0.4).Count(); n != 64*48 {
		t.Errorf("got %d px, want all", n)
	}
	if n := LitPart(NewPlane(64, 48), 0.4).Count(); n != 0 {
		t.Errorf("of a black frame got %d px, want none", n)
	}
}
