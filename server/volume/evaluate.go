package volume

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// Evaluate works a plan out at its own quantities and the extra exact ones
// (good units shipped). The plan must be validated, with its ledger yields and
// studies resolved. progress, if not nil, is called from several goroutines
// with the share of the work done.
func Evaluate(ctx context.Context, p *plan.Plan, quantities []float64, progress func(done, total int)) (*Result, error) {
	e, err := newEvaluation(p, quantities)
	if err != nil {
		return nil, err
	}
	if progress != nil {
		e.progress = progress
	}
	for _, step := range []func(context.Context) error{
		e.nominal, e.simulate, e.findCrossovers, e.distributeCrossovers, e.valueInformation, e.bestThreshold,
	} {
		if err := step(ctx); err != nil {
			return nil, err
		}
	}
	e.result.Ranges = ranges(e.result.Quantities, p.Uncertainty.Level)
	e.result.AllOrNone = e.allOrNone()
	e.result.Yields = e.yields()
	e.result.Assumptions = p.Assumptions()
	e.result.Cautions = e.cautions()
	return &e.result, nil
}

// evaluation is the work in hand.
type evaluation struct {
	plan      *plan.Plan
	knowledge *plan.Knowledge
	model     *cost.Model
	truth     plan.World // at the best single figures
	worlds    []plan.World
	combos    [][2]int // process, inspection
	at        []*cost.Combination
	result    Result
	progress  func(done, total int)
}

func newEvaluation(p *plan.Plan, quantities []float64) (*evaluation, error) {
	if err := p.Validate(); err != nil {
		return nil, err
	}
	for _, q := range quantities {
		if !(q >= 1 && q <= 1e9) {
			return nil, fmt.Errorf("quantity %v; allowed: 1 to 1e9 good units", q)
		}
	}
	knowledge, err := plan.Know(p)
	if err != nil {
		return nil, err
	}
	model, err := cost.NewModel(p)
	if err != nil {
		return nil, err
	}
	e := &evaluation{plan: p, knowledge: knowledge, model: model, progress: func(int, int) {}}
	e.truth = knowledge.World(knowledge.Values())
	e.result = Result{Name: p.Name, Currency: p.Currency, Basis: Basis, Draws: p.Uncertainty.Draws,
		Seed: p.Uncertainty.Seed, Level: p.Uncertainty.Level}
	e.combine()
	e.result.Quantities = grid(p, quantities)
	return e, nil
}

func (e *evaluation) combine() {
	for i, process := range e.plan.Processes {
		for j, option := range e.plan.Inspections {
			e.combos = append(e.combos, [2]int{i, j})
			e.at = append(e.at, e.model.Combination(i, j, &e.truth))
			e.result.Combinations = append(e.result.Combinations, Combination{process.Name, option.Name})
		}
	}
}

// grid merges the log grid, rounded to whole units, with the exact quantities.
func grid(p *plan.Plan, extra []float64) []Quantity {
	asked := map[float64]bool{}
	q := p.Quantities
	for i := range q.Points {
		share := float64(i) / float64(q.Points-1)
		asked[math.Round(q.From*math.Pow(q.To/q.From, share))] = false
	}
	for _, exact := range append(slices.Clone(q.Exact), extra...) {
		asked[exact] = true
	}
	var all []Quantity
	for good, exact := range asked {
		all = append(all, Quantity{Good: good, Asked: exact})
	}
	slices.SortFunc(all, func(a, b Quantity) int {
		if a.Good < b.Good {
			return -1
		}
		return 1
	})
	return all
}

// nominal fills every cell at the best single figures.
func (e *evaluation) nominal(context.Context) error {
	for i := range e.result.Quantities {
		q := &e.result.Quantities[i]
		for c, combination := range e.at {
			cell, err := e.cell(combination, e.combos[c][0], q.Good)
			if err != nil {
				return fmt.Errorf("%s at %v: %w", e.result.Combinations[c], q.Good, err)
			}
			q.Cells = append(q.Cells, cell)
			if cell.Cost < q.Cells[q.Best].Cost {
				q.Best = c
			}
		}
	}
	return nil
}

func (e *evaluation) cell(c *cost.Combination, process int, good float64) (Cell, error) {
	starts := c.Starts(good)
	if math.IsInf(starts, 1) {
		return Cell{}, fmt.Errorf("no good unit ever ships at a yield of %v", e.truth.Yield[process])
	}
	stations, err := c.Stations(good)
	if err != nil {
		return Cell{}, err
	}
	cell := Cell{Cost: Money(c.PerGood(good)), Parts: c.Parts(good).Over(good), Starts: starts, Stations: stations,
		EscapesPerMillion: c.EscapesPerMillion(good), OutsideUsual: !e.plan.Processes[process].UsualQuantity.Holds(good)}
	if price := e.plan.Outcomes.Price; price > 0 {
		profit := price - float64(cell.Cost)
		cell.ProfitPerGood = &profit
	}
	return cell, nil
}
