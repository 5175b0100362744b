package volume

import (
	"context"
	"math"
	"slices"
	"sync"

	"lapgate/server/volume/cost"
)

// pairBudget bounds the evaluations spent on one pair of combinations.
const pairBudget = 20000

func curve(c *cost.Combination) Curve { return Curve{c.Total, c.MonotoneFrom()} }

// span is the range crossovers are looked for: that of the quantities.
func (e *evaluation) span() (from, to float64) {
	q := e.result.Quantities
	return q[0].Good, q[len(q)-1].Good
}

// findCrossovers solves every pair at the best single figures.
func (e *evaluation) findCrossovers(ctx context.Context) error {
	from, to := e.span()
	var lock sync.Mutex
	n := len(e.combos)
	err := each(ctx, n*n, func(pair int) {
		a, b := pair/n, pair%n
		if a >= b {
			return
		}
		found, complete := Crossings(curve(e.at[a]), curve(e.at[b]), from, to, pairBudget)
		lock.Lock()
		defer lock.Unlock()
		if !complete {
			e.result.Cautions = append(e.result.Cautions, "crossovers of "+e.result.Combinations[a].String()+" and "+
				e.result.Combinations[b].String()+" lie too close to be all told apart; the list holds the first ones")
		}
		for _, c := range found {
			e.result.Crossovers = append(e.result.Crossovers, Crossover{First: a, Second: b, Crossing: c,
				WinnerTurn: e.winnerTurns(a, b, c.Quantity), Cost: Money(e.at[a].PerGood(c.Quantity))})
		}
	})
	slices.SortFunc(e.result.Crossovers, func(x, y Crossover) int {
		return compare(x.Quantity, y.Quantity, x.First-y.First, x.Second-y.Second)
	})
	slices.Sort(e.result.Cautions)
	return err
}

func compare(x, y float64, ties ...int) int {
	switch {
	case x < y:
		return -1
	case x > y:
		return 1
	}
	for _, t := range ties {
		if t != 0 {
			return t
		}
	}
	return 0
}

// winnerTurns says whether the cheapest of all combinations changes from one
// of the two to the other at the quantity.
func (e *evaluation) winnerTurns(a, b int, quantity float64) bool {
	below, above := e.cheapest(quantity*(1-1e-9)), e.cheapest(quantity*(1+1e-9))
	return (below == a && above == b) || (below == b && above == a)
}

func (e *evaluation) cheapest(quantity float64) int {
	best, least := 0, math.Inf(1)
	for c, combination := range e.at {
		if v := combination.Total(quantity); v < least {
			best, least = c, v
		}
	}
	return best
}
