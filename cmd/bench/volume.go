package main

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"time"

	"lapgate/configs"
	"lapgate/server/volume"
	"lapgate/server/volume/plan"
)

// benchVolume times one evaluation of 12 processes x 6 inspection options x 60 quantities
// x 10 000 draws, with every crossover followed, on all processors.
func benchVolume(options) (map[string]figure, error) {
	p, err := largePlan()
	if err != nil {
		return nil, err
	}
	start := time.Now()
	r, err := volume.Evaluate(context.Background(), p, nil, nil)
	if err != nil {
		return nil, err
	}
	took := time.Since(start)
	if len(r.Combinations) != 72 || len(r.Quantities) != 60 || r.Draws != 10000 {
		return nil, fmt.Errorf("%d combinations, %d quantities, %d draws; want 72, 60 and 10000", len(r.Combinations), len(r.Quantities), r.Draws)
	}
	return map[string]figure{"volume_plan_ms": {float64(took.Milliseconds()), "ms"}}, nil
}

// largePlan is the demo plan with every process four times, each copy with dearer tools
// and cheaper starts than the last, and two inspection options more.
func largePlan() (*plan.Plan, error) {
	text, err := configs.Demo.ReadFile("demo/volume.yaml")
	if err != nil {
		return nil, err
	}
	p, _, err := configs.Decode("volume.yaml", text, plan.Plan{})
	if err != nil {
		return nil, err
	}
	p.Format, p.Threshold, p.Quantities.Exact = plan.Format, nil, nil
	made := p.Processes
	p.Processes = nil
	for i := range 4 * len(made) {
		p.Processes = append(p.Processes, copyOf(made[i%len(made)], i/len(made)))
	}
	all := slices.IndexFunc(p.Inspections, func(x plan.Inspection) bool { return x.Kind == plan.Full })
	if all < 0 {
		return nil, errors.New("the demo plan has no full inspection to make two more options of")
	}
	stream, majority := p.Inspections[all], p.Inspections[all]
	stream.Name, stream.Kind, stream.CSP1 = "stream", plan.CSP, &plan.Stream{Clearance: 21, Fraction: 0.1}
	same := 0.5
	majority.Name, majority.Kind, majority.SameResultShare = "majority", plan.TwiceMajority, &same
	p.Inspections = append(p.Inspections, stream, majority)
	return &p, p.ResolveLedger(func(plan.LedgerFilter) (plan.Counts, error) {
		return plan.Counts{Started: 200, Accepted: 176, Rejected: 24}, nil // invented
	})
}

func copyOf(x plan.Process, n int) plan.Process {
	x.Name = fmt.Sprintf("%s-%d", x.Name, n)
	x.ToolingCost *= 1 + 0.3*float64(n)
	x.CostPerStart = slices.Clone(x.CostPerStart)
	for i := range x.CostPerStart {
		x.CostPerStart[i].Cost *= 1 - 0.02*float64(n)
	}
	return x
}
