package volume

import (
	"context"
	"slices"
	"strings"

	"lapgate/server/volume/decision"
)

// Information is what knowing more is worth for the choice of a combination at
// one quantity: money for the whole quantity.
type Information struct {
	Good    float64       `json:"good_units"`
	Perfect float64       `json:"perfect"` // of everything at once, over the draws
	Inputs  []InputWorth  `json:"inputs"`  // the most worth first
	Samples []SampleWorth `json:"samples"`
}

// InputWorth is the value of knowing one input exactly, the others held at
// their best single figures.
type InputWorth struct {
	Input   string  `json:"input"`
	Perfect float64 `json:"perfect"`
}

// SampleWorth is the value of more inspected units of one process, judged as
// its yield was measured.
type SampleWorth struct {
	Process string  `json:"process"`
	Units   int     `json:"units"`
	Worth   float64 `json:"worth"`
}

// sampleSizes are the further inspected units whose worth is stated.
func sampleSizes() []int { return []int{50, 200, 1000} }

// beliefPoints is how many equally likely points stand for one belief.
const beliefPoints = 200

// valueInformation works at the quantities asked for.
func (e *evaluation) valueInformation(ctx context.Context) error {
	for _, q := range e.result.Quantities {
		if !q.Asked {
			continue
		}
		if err := ctx.Err(); err != nil {
			return err
		}
		info := Information{Good: q.Good, Perfect: e.perfect(q.Good)}
		e.valueInputs(&info)
		e.result.Information = append(e.result.Information, info)
	}
	return nil
}

// perfect compares choosing once with choosing in every world.
func (e *evaluation) perfect(good float64) float64 {
	n := decision.Nodes{Success: make([]float64, len(e.worlds))}
	for _, c := range e.combos {
		costs := make([]float64, len(e.worlds))
		for d := range e.worlds {
			costs[d] = bounded(e.model.Combination(c[0], c[1], &e.worlds[d]).Total(good))
		}
		n.Cost = append(n.Cost, costs)
	}
	return n.Perfect()
}

// bounded keeps a world without any good unit from making means infinite.
func bounded(total float64) float64 { return min(total, 1e15) }

func (e *evaluation) valueInputs(info *Information) {
	for i, belief := range e.knowledge.Beliefs {
		if belief.Certain() {
			continue
		}
		nodes := e.nodes(i, info.Good)
		name := e.knowledge.Names[i]
		info.Inputs = append(info.Inputs, InputWorth{name, nodes.Perfect()})
		if !strings.HasPrefix(name, "processes.") {
			continue
		}
		process := e.plan.Processes[i-e.knowledge.YieldIndex(0)].Name
		for _, units := range sampleSizes() {
			info.Samples = append(info.Samples, SampleWorth{process, units, nodes.Sample(units)})
		}
	}
	slices.SortStableFunc(info.Inputs, func(a, b InputWorth) int { return compare(b.Perfect, a.Perfect) })
}

// nodes holds one belief as points, the others at their best single figures.
// An observation succeeds with the share as measured, gate errors included.
func (e *evaluation) nodes(belief int, good float64) decision.Nodes {
	n := decision.Nodes{Cost: make([][]float64, len(e.combos))}
	values := e.knowledge.Values()
	for j := range beliefPoints {
		share := e.knowledge.Beliefs[belief].Quantile((float64(j) + 0.5) / beliefPoints)
		values[belief] = share
		world := e.knowledge.World(values)
		n.Success = append(n.Success, share)
		for c, combo := range e.combos {
			n.Cost[c] = append(n.Cost[c], bounded(e.model.Combination(combo[0], combo[1], &world).Total(good)))
		}
	}
	return n
}
