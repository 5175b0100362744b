package volume

import (
	"fmt"
	"math"

	"lapgate/server/volume/decision"
	"lapgate/server/volume/plan"
)

// AllOrNone sets Deming's rule beside the full model for one process and one
// option that inspects every unit, against an option that inspects none.
type AllOrNone struct {
	Process    string         `json:"process"`
	Inspection string         `json:"inspection"`
	Bad        float64        `json:"fraction_nonconforming"`
	BreakEven  float64        `json:"break_even_fraction"`
	Rule       decision.Depth `json:"rule"`
	Model      decision.Depth `json:"model"` // at the largest quantity
}

// allOrNone is empty for a plan without an option that inspects none.
func (e *evaluation) allOrNone() []AllOrNone {
	_, quantity := e.span()
	var all []AllOrNone
	for c, combo := range e.combos {
		none := e.noneOf(combo[0])
		if none < 0 || e.plan.Inspections[combo[1]].Kind != plan.Full || e.at[c].EscapeCost() == 0 {
			continue
		}
		k1, k2, bad := e.at[c].LookCost(), e.at[c].EscapeCost(), 1-e.truth.Yield[combo[0]]
		model := decision.InspectNone
		if e.at[c].Total(quantity) < e.at[none].Total(quantity) {
			model = decision.InspectAll
		}
		name := e.result.Combinations[c]
		all = append(all, AllOrNone{name.Process, name.Inspection, bad, decision.AllOrNoneBreakEven(k1, k2),
			decision.AllOrNone(bad, k1, k2), model})
	}
	return all
}

func (e *evaluation) noneOf(process int) int {
	for c, combo := range e.combos {
		if combo[0] == process && e.plan.Inspections[combo[1]].Kind == plan.None {
			return c
		}
	}
	return -1
}

// yields tells the yields as measured and as used, with the interval of what
// was used over the draws.
func (e *evaluation) yields() []YieldUsed {
	var all []YieldUsed
	level := e.plan.Uncertainty.Level
	for i, process := range e.plan.Processes {
		belief := e.knowledge.Beliefs[e.knowledge.YieldIndex(i)]
		u := YieldUsed{Process: process.Name, Measured: belief.Value(), Used: e.truth.Yield[i], Counts: process.Yield.Counts,
			From: process.Yield.From(process.Sources)}
		draws, clipped := make([]float64, len(e.worlds)), 0.0
		for d, w := range e.worlds {
			draws[d] = w.Yield[i]
			if e.knowledge.Gate(i) >= 0 && (draws[d] == 0 || draws[d] == 1) {
				clipped++
			}
		}
		u.Low, u.High = quantiles(draws, (1-level)/2, (1+level)/2)
		u.ClippedDraw = clipped / float64(len(e.worlds))
		all = append(all, u)
	}
	return all
}

// cautions are what a reader must know before acting on the figures.
func (e *evaluation) cautions() []string {
	all := append(e.result.Cautions,
		"Cost figures are estimates that rest on the listed assumptions.",
		"A verdict is not a certificate: acceptance follows the contract's drawing and standard, and an accredited laboratory where one is required.",
		"Bright LED and laser lighting can hurt eyes (IEC 62471, IEC 60825): follow the maker's and local rules.",
		"The reject gate is not a safety device: machine guarding follows local codes and licensed practice.",
		"Costs and crossovers are "+Basis+"; counted per start they differ.")
	uncorrectable := 0.0
	for _, w := range e.worlds {
		if w.Uncorrectable {
			uncorrectable++
		}
	}
	if uncorrectable > 0 {
		all = append(all, fmt.Sprintf("In %.1f %% of the draws a gate's misses and false rejects add up to 1 or more: its yields could not be corrected there.",
			100*uncorrectable/math.Max(1, float64(len(e.worlds)))))
	}
	for _, y := range e.yields() {
		if y.ClippedDraw > 0.01 {
			all = append(all, fmt.Sprintf("In %.0f %% of the draws the corrected yield of %s left 0..1 and was held there: its gate is too poorly known.",
				100*y.ClippedDraw, y.Process))
		}
		if c := y.Counts; c != nil && c.Held > 0 {
			all = append(all, fmt.Sprintf("%d held units of %s are in neither its accepts nor its rejects.", c.Held, y.Process))
		}
	}
	return all
}
