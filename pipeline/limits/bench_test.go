package limits

import (
	"fmt"
	"slices"
	"testing"

	"lapgate/pipeline"
)

// BenchmarkJudge judges a unit of 100 defects against 10 limits on each defect.
func BenchmarkJudge(b *testing.B) {
	e := evidence()
	e.Defects = slices.Repeat([]pipeline.Defect{{ID: 1, Kind: pipeline.Dig, Zone: "clear", LengthUM: 20, WidthUM: 12, DiameterUM: 15}}, 100)
	var specs []Spec
	for i := range 10 {
		specs = append(specs, Spec{Name: fmt.Sprint("limit ", i), Each: "length_um > 4*width_um && width_um >= 10"})
	}
	j, err := New(specs, 0.9)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if v, _ := j.Judge(e); v != pipeline.Accept {
			b.Fatal(v)
		}
	}
}

func BenchmarkNew(b *testing.B) {
	for b.Loop() {
		if _, err := New([]Spec{digSize}, 0.9); err != nil {
			b.Fatal(err)
		}
	}
}
