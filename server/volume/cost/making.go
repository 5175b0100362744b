package cost

import (
	"math"

	"lapgate/server/volume/learning"
	"lapgate/server/volume/plan"
)

// maker is one process made ready.
type maker struct {
	process *plan.Process
	curve   *learning.Curve
	share   float64   // part of the price that learns
	scale   float64   // brings the curve to 1 at the start the price was given for
	atBreak []float64 // what buying just up to each price break costs
}

// starts rounds the expected starts up to whole blocks.
func (m *maker) starts(expected float64) float64 {
	if b := m.process.BlockSize; b > 0 {
		return b * ceil(expected/b)
	}
	return expected
}

// making is setups plus the price of the starts. Where buying up to the next
// price break costs less than stopping short of it, that is done.
func (m *maker) making(starts float64) float64 {
	best, learned := math.Inf(1), m.learned(starts)
	for i, b := range m.process.CostPerStart {
		total := m.atBreak[i]
		if b.FromStarts <= starts || i == 0 {
			total = b.Cost * learned
		}
		best = math.Min(best, total)
	}
	return best + m.setups(starts)*m.process.SetupCost
}

// learned is the starts weighted by what each costs relative to the price.
func (m *maker) learned(starts float64) float64 {
	if m.curve == nil {
		return starts
	}
	return (1-m.share)*starts + m.share*m.scale*m.curve.Total(starts)
}

func (m *maker) setups(starts float64) float64 {
	if m.process.BatchSize <= 0 {
		return 1
	}
	return ceil(starts / m.process.BatchSize)
}

// tooling is the sets of tools, with a first article for each, and the
// repairs within their lives.
func (m *maker) tooling(starts float64) float64 {
	x := m.process
	sets, last := 1.0, starts
	if x.ToolingLifeStarts > 0 {
		sets = math.Max(1, ceil(starts/x.ToolingLifeStarts))
		last = starts - (sets-1)*x.ToolingLifeStarts
	}
	total := sets * (x.ToolingCost + x.FirstArticleCost)
	if x.RepairEveryStarts > 0 {
		total += x.RepairCost * ((sets-1)*m.repairs(x.ToolingLifeStarts) + m.repairs(last))
	}
	return total
}

// repairs are those due before the last of the starts of one set.
func (m *maker) repairs(starts float64) float64 {
	return math.Max(0, ceil(starts/m.process.RepairEveryStarts)-1)
}

// ceil forgives the rounding of a division that should be whole.
func ceil(x float64) float64 { return math.Ceil(x - 1e-9*math.Max(1, x)) }
