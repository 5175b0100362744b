package pipeline_test

import (
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/stagetest"
)

// Rendered fibres bend back and scratches do not: coil and elongation tell them apart.
func TestFibresCoil(t *testing.T) {
	s := stagetest.SmallScene()
	r := stagetest.Render(t, s)
	for i := range 6 {
		for _, o := range []render.Object{
			{Kind: pipeline.Scratch, UUM: 300, LengthUM: 2400, WidthUM: 40, BrightnessDN: 80, AngleDeg: 31 * float64(i), BendPerMM: 0.03},
			{Kind: pipeline.Fibre, UUM: 300, LengthUM: 2400, WidthUM: 40, BrightnessDN: 80, AngleDeg: 31 * float64(i), BendPerMM: 2.2},
		} {
			u := r.Unit(i)
			u.Add(o)
			var d pipeline.Defect
			for _, found := range look(t, r, u) {
				if found.LengthUM > d.LengthUM {
					d = found
				}
			}
			if coiled := d.Coil() > 1.15; coiled != (o.Kind == pipeline.Fibre) || d.Elongation() < 4 {
				t.Errorf("%s at %g°: coil %.2f, elongation %.1f, length %.0f µm", o.Kind, o.AngleDeg, d.Coil(), d.Elongation(), d.LengthUM)
			}
		}
	}
}

func TestMeasuresOfDefects(t *testing.T) {
	chip := pipeline.Defect{Kind: pipeline.EdgeChip, LengthUM: 300, WidthUM: 60, LengthPx: 30, Box: pipeline.Box{X1: 30, Y1: 40}}
	if chip.ReachUM() != 60 || chip.Elongation() != 5 || math.Abs(chip.Coil()-0.6) > 1e-12 {
		t.Errorf("got %g, %g, %g", chip.ReachUM(), chip.Elongation(), chip.Coil())
	}
	if (pipeline.Defect{Kind: pipeline.Dig, WidthUM: 60}).ReachUM() != 0 || (pipeline.Defect{}).Elongation() != 0 || (pipeline.Defect{}).Coil() != 0 {
		t.Error("what is not there has a measure")
	}
}
