package render

import (
	"math"
	"testing"

	"lapgate/pipeline"
)

// A frame without noise to speak of: the dots lie where the truth says, and their light
// above the plate is brightness × area.
func TestTargetDotsAreWhereTheTruthSays(t *testing.T) {
	s := bare()
	s.Camera.GainDNPerE, s.Camera.DarkNoiseE = 1e-4, 0
	s.Reference = Reference{}
	target := Target{PitchUM: 4000, Columns: 7, Rows: 5, DiametersUM: []float64{1000, 500}, BackgroundDN: 100, BrightnessDN: 1000,
		FluxExponent: 1, RotationDeg: 3, ShiftXPx: 2.3, K1: 0.02, LensXPx: 0.5, LensYPx: 0.5}
	f, dots, err := newRenderer(t, s).TargetFrame("ring", target, 0)
	if err != nil {
		t.Fatal(err)
	}
	p, _ := f.Raw.Plane()
	if len(dots) != 35 {
		t.Fatalf("%d dots, want 35", len(dots))
	}
	for _, d := range dots {
		sum, mx, my := 0.0, 0.0, 0.0
		for y := int(d.YPx) - 12; y <= int(d.YPx)+12; y++ {
			for x := int(d.XPx) - 12; x <= int(d.XPx)+12; x++ {
				if x < 0 || y < 0 || x >= p.Width || y >= p.Height {
					continue
				}
				v := float64(p.At(x, y)) - 150
				sum, mx, my = sum+v, mx+v*float64(x), my+v*float64(y)
			}
		}
		near(t, "x", mx/sum, d.XPx, 0.03)
		near(t, "y", my/sum, d.YPx, 0.03)
		near(t, "flux", sum/d.FluxDNPx, 1, 0.02)
	}
	// Flux to the first power of the diameter: half of that of 1 000 µm, where the local scales agree.
	near(t, "law", dots[17].FluxDNPx/dots[18].FluxDNPx, []float64{2, 0.5}[17%2], 0.02)
	// The lens moves a corner dot outwards by k1·ρ²: the middle one not at all.
	near(t, "middle dot", math.Hypot(dots[17].XPx-151.8, dots[17].YPx-119.5), 0, 0.01)
	flat := target
	flat.K1 = 0
	_, straight, _ := newRenderer(t, s).TargetFrame("ring", flat, 0)
	dx, dy := straight[0].XPx-150, straight[0].YPx-120
	near(t, "stretch", math.Hypot(dots[0].XPx-150, dots[0].YPx-120)/math.Hypot(dx, dy), 1+0.02*(dx*dx+dy*dy)/(150*150+120*120), 1e-9)
}

func TestTargetIsChecked(t *testing.T) {
	r := newRenderer(t, bare())
	for _, target := range []Target{{PitchUM: 100, Columns: 3, Rows: 3}, {PitchUM: 100, Columns: 3, Rows: 3, DiametersUM: []float64{120}}, {PitchUM: 100, Rows: 3, DiametersUM: []float64{20}}} {
		if _, _, err := r.TargetFrame("ring", target, 0); pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%+v: got %v", target, err)
		}
	}
}
