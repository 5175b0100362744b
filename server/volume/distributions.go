package volume

import (
	"context"
	"math"
	"slices"
	"sync"
	"sync/atomic"

	"lapgate/server/volume/plan"
)

// All draws serve the crossovers that open a turn of the cheapest combination.
// The others share followBudget searches, but get fewestDraws at least.
const (
	followBudget = 400_000
	fewestDraws  = 200
)

// distributeCrossovers gives every crossover its distribution. Every world is
// entered once for all of them; those followed through fewer draws take the
// first ones, which are as fair a sample as any.
func (e *evaluation) distributeCrossovers(ctx context.Context) error {
	all := e.followed()
	if len(all) == 0 {
		return nil
	}
	from, to := e.span()
	f := newFollower(e.model, e.combos, math.Max(1, from/100), math.Min(1e9, to*100))
	draws := e.followedDraws()
	var done atomic.Int64
	at, err := f.follow(ctx, e.worlds, all, draws, func() {
		e.progress(len(e.combos)*(len(e.worlds)+int(done.Add(1)))/len(e.worlds), 2*len(e.combos))
	})
	if err != nil {
		return err
	}
	deltas := f.deltas(e.knowledge, all)
	for i := range e.result.Crossovers {
		d := distribution(at[i], e.plan.Uncertainty.Level)
		d.DeltaSD = Money(deltas[i])
		e.result.Crossovers[i].Distribution = d
	}
	return nil
}

func (e *evaluation) followed() []followed {
	var all []followed
	for _, x := range e.result.Crossovers {
		all = append(all, followed{x.First, x.Second, x.Quantity})
	}
	return all
}

// followedDraws is the number of draws for every crossover.
func (e *evaluation) followedDraws() []int {
	n := len(e.result.Crossovers)
	draws := slices.Repeat([]int{min(len(e.worlds), max(fewestDraws, followBudget/n))}, n)
	last := -1
	for _, i := range e.result.winnerTurns() {
		if e.result.opensTurn(last, i) {
			draws[i] = len(e.worlds)
		}
		last = i
	}
	return draws
}

// follow looks for each crossover in the first so many worlds: crossover by
// world, NaN where there is none. tick is called once per world.
func (f *follower) follow(ctx context.Context, worlds []plan.World, all []followed, draws []int, tick func()) ([][]float64, error) {
	at := make([][]float64, len(all))
	for i := range at {
		at[i] = make([]float64, draws[i])
	}
	scenes := sync.Pool{New: func() any { return f.scene() }}
	err := each(ctx, slices.Max(draws), func(d int) {
		s := scenes.Get().(*scene).enter(&worlds[d])
		defer scenes.Put(s)
		for i, x := range all {
			if d < draws[i] {
				at[i][d] = s.nearest(x)
			}
		}
		tick()
	})
	return at, err
}

// distribution sums up where a crossover lies, one quantity per draw, NaN
// where there is none.
func distribution(at []float64, level float64) *CrossingDistribution {
	d := &CrossingDistribution{Draws: len(at)}
	at = slices.DeleteFunc(at, math.IsNaN)
	d.Share = float64(len(at)) / float64(d.Draws)
	if len(at) == 0 {
		return d
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
	return d
}

// deltas is the first-order standard deviation of every crossover: the root
// of the sum of (slope times sd) squared over all beliefs (delta method),
// slopes by central differences of a quarter sd. NaN where a crossover is lost
// on the way.
func (f *follower) deltas(k *plan.Knowledge, all []followed) []float64 {
	values, sd := k.Values(), make([]float64, len(all))
	for i, belief := range k.Beliefs {
		_, v := belief.Moments()
		if v == 0 {
			continue
		}
		h, centre := math.Sqrt(v)/4, values[i]
		low, high := math.Max(0, centre-h), math.Min(1, centre+h)
		values[i] = low
		below := k.World(slices.Clone(values))
		values[i] = high
		above := k.World(slices.Clone(values))
		values[i] = centre
		atLow, atHigh := f.scene().enter(&below), f.scene().enter(&above)
		for j, x := range all {
			slope := (atHigh.nearest(x) - atLow.nearest(x)) / (high - low)
			sd[j] = math.Hypot(sd[j], slope*math.Sqrt(v))
		}
	}
	return sd
}
