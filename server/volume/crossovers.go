package volume

import (
	"context"
	"math"
	"slices"
	"sync"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
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

// distributeCrossovers fills the distributions of the winner turns. Of several
// in a row of the same two combinations only the first gets one: the others
// are steps of the same contest.
func (e *evaluation) distributeCrossovers(ctx context.Context) error {
	from, to := e.span()
	last := -1
	for _, i := range e.result.winnerTurns() {
		x := &e.result.Crossovers[i]
		opens := e.result.opensTurn(last, i)
		last = i
		if !opens {
			continue
		}
		s := spread{model: e.model, a: e.combos[x.First], b: e.combos[x.Second], near: x.Quantity,
			from: math.Max(1, from/100), to: math.Min(1e9, to*100)}
		d, err := s.over(ctx, e.worlds, e.plan.Uncertainty.Level)
		if err != nil {
			return err
		}
		d.DeltaSD = Money(s.delta(e.knowledge))
		x.Distribution = &d
	}
	return nil
}

// spread follows one crossover from world to world.
type spread struct {
	model    *cost.Model
	a, b     [2]int
	near     float64 // where it lies at the best single figures
	from, to float64
}

// in is the crossover of one world nearest the nominal one; NaN if none.
func (s *spread) in(w *plan.World) float64 {
	a := s.model.Combination(s.a[0], s.a[1], w)
	b := s.model.Combination(s.b[0], s.b[1], w)
	return nearestTurn(curve(a), curve(b), s.near, s.from, s.to)
}

func (s *spread) over(ctx context.Context, worlds []plan.World, level float64) (CrossingDistribution, error) {
	at := make([]float64, len(worlds))
	err := each(ctx, len(worlds), func(d int) { at[d] = s.in(&worlds[d]) })
	at = slices.DeleteFunc(at, math.IsNaN)
	d := CrossingDistribution{Share: float64(len(at)) / float64(len(worlds))}
	if len(at) == 0 || err != nil {
		return d, err
	}
	slices.Sort(at)
	point := func(q float64) float64 { return at[int(q*float64(len(at)-1)+0.5)] }
	d.Low, d.Median, d.High = point((1-level)/2), point(0.5), point((1+level)/2)
	mean, squares := 0.0, 0.0
	for _, v := range at {
		mean += v / float64(len(at))
	}
	for _, v := range at {
		squares += (v - mean) * (v - mean) / float64(len(at))
	}
	d.SD = math.Sqrt(squares)
	return d, nil
}

// delta is the first-order standard deviation of the crossover: the root of
// the sum of (slope times sd) squared over all beliefs (delta method), slopes
// by central differences of a quarter sd. NaN where a crossover is lost on
// the way or the costs step.
func (s *spread) delta(k *plan.Knowledge) float64 {
	values, variance := k.Values(), 0.0
	for i, belief := range k.Beliefs {
		_, v := belief.Moments()
		if v == 0 {
			continue
		}
		h, centre := math.Sqrt(v)/4, values[i]
		low, high := math.Max(0, centre-h), math.Min(1, centre+h)
		values[i] = low
		below := k.World(values)
		atLow := s.in(&below)
		values[i] = high
		above := k.World(values)
		atHigh := s.in(&above)
		values[i] = centre
		slope := (atHigh - atLow) / (high - low)
		variance += slope * slope * v
	}
	return math.Sqrt(variance)
}
