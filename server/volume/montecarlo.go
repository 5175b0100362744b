package volume

import (
	"context"
	"math"
	"sync"
	"sync/atomic"
)

// simulate evaluates every combination in every world and fills the bands and
// the chances of being the cheapest.
func (e *evaluation) simulate(ctx context.Context) error {
	e.worlds = draw(e.knowledge, e.plan.Uncertainty.Seed, e.plan.Uncertainty.Draws)
	winners := newWinners(len(e.result.Quantities), len(e.worlds))
	var done atomic.Int64
	err := each(ctx, len(e.combos), func(c int) {
		costs := e.costs(c)
		winners.merge(costs, uint16(c))
		for q := range costs {
			e.band(&e.result.Quantities[q].Cells[c], costs[q])
		}
		e.progress(int(done.Add(1)), 2*len(e.combos)) // the other half: crossovers
	})
	if err != nil {
		return err
	}
	for q := range e.result.Quantities {
		for _, c := range winners.index[q] {
			e.result.Quantities[q].Cells[c].ChanceBest += 1 / float64(len(e.worlds))
		}
	}
	return nil
}

// costs of one combination per good unit, quantity by draw.
func (e *evaluation) costs(c int) [][]float64 {
	costs := make([][]float64, len(e.result.Quantities))
	for q := range costs {
		costs[q] = make([]float64, len(e.worlds))
	}
	for d := range e.worlds {
		combination := e.model.Combination(e.combos[c][0], e.combos[c][1], &e.worlds[d])
		for q := range costs {
			costs[q][d] = combination.PerGood(e.result.Quantities[q].Good)
		}
	}
	return costs
}

// band fills a cell from its draws, which it reorders.
func (e *evaluation) band(cell *Cell, draws []float64) {
	var sum, squares, ship float64
	for _, v := range draws {
		if math.IsInf(v, 0) {
			continue
		}
		sum, squares, ship = sum+v, squares+v*v, ship+1
	}
	n := float64(len(draws))
	cell.NeverShipsInDraws = 1 - ship/n
	cell.Mean = Money(sum / ship)
	cell.StandardErrorOfAvg = Money(math.Sqrt(math.Max(0, squares/ship-sum/ship*sum/ship) / ship))
	level := e.plan.Uncertainty.Level
	low, high := quantiles(draws, (1-level)/2, (1+level)/2)
	cell.Low, cell.High = Money(low), Money(high)
}

// winners keeps the cheapest combination of every draw at every quantity. A
// tie goes to the combination named first, whatever the order of merging.
type winners struct {
	lock  sync.Mutex // guards the two below
	least [][]float64
	index [][]uint16
}

func newWinners(quantities, draws int) *winners {
	w := &winners{least: make([][]float64, quantities), index: make([][]uint16, quantities)}
	for q := range w.least {
		w.least[q], w.index[q] = make([]float64, draws), make([]uint16, draws)
		for d := range w.least[q] {
			w.least[q][d] = math.Inf(1)
		}
	}
	return w
}

func (w *winners) merge(costs [][]float64, c uint16) {
	w.lock.Lock()
	defer w.lock.Unlock()
	for q, draws := range costs {
		least, index := w.least[q], w.index[q]
		for d, v := range draws {
			if v < least[d] || (v == least[d] && c < index[d]) {
				least[d], index[d] = v, c
			}
		}
	}
}

// ranges joins neighbouring quantities with the same cheapest combination and
// the same certainty.
func ranges(quantities []Quantity, level float64) []Range {
	var all []Range
	for _, q := range quantities {
		r := Range{q.Good, q.Good, q.Best, q.Cells[q.Best].ChanceBest >= level, runnerUp(q)}
		if n := len(all); n > 0 && all[n-1].Best == r.Best && all[n-1].Certain == r.Certain &&
			(r.Certain || all[n-1].RunnerUp == r.RunnerUp) {
			all[n-1].To = r.To
			continue
		}
		all = append(all, r)
	}
	return all
}

// runnerUp is the other combination most often cheapest, by cost where no
// draw tells.
func runnerUp(q Quantity) int {
	second := -1
	for c, cell := range q.Cells {
		if c == q.Best {
			continue
		}
		if second < 0 || cell.ChanceBest > q.Cells[second].ChanceBest ||
			(cell.ChanceBest == q.Cells[second].ChanceBest && cell.Cost < q.Cells[second].Cost) {
			second = c
		}
	}
	return second
}
