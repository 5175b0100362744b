package volume

import (
	"context"
	"fmt"
	"testing"

	"lapgate/server/volume/plan"
)

// BenchmarkVolumePlan is 12 processes x 6 inspection options x 60 quantities x
// 10 000 draws; volume_plan_ms is one evaluation.
func BenchmarkVolumePlan(b *testing.B) {
	p := rich()
	base := p.Processes
	p.Processes = nil
	for i := range 12 {
		process := base[i%2]
		process.Name = fmt.Sprintf("process-%d", i)
		process.ToolingCost *= 1 + 0.3*float64(i)
		process.CostPerStart = append([]plan.PriceBreak(nil), process.CostPerStart...)
		process.CostPerStart[0].Cost *= 1 - 0.02*float64(i)
		p.Processes = append(p.Processes, process)
	}
	p.Quantities = plan.Quantities{From: 10, To: 1_000_000, Points: 60}
	p.Uncertainty.Draws = 10000
	for b.Loop() {
		r, err := Evaluate(context.Background(), p, nil, nil)
		if err != nil {
			b.Fatal(err)
		}
		if len(r.Combinations) != 72 {
			b.Fatalf("%d combinations", len(r.Combinations))
		}
	}
	b.ReportMetric(float64(b.Elapsed().Milliseconds())/float64(b.N), "volume_plan_ms")
}
