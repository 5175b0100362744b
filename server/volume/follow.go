package volume

import (
	"math"
	"slices"
	"sort"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// follower looks for the crossings of many pairs of combinations in one world
// after another. The pairs share a grid of quantities, so every curve is
// worked out at most once per world and grid point.
type follower struct {
	model  *cost.Model
	combos [][2]int  // process, inspection
	grid   []float64 // good units, rising
}

// followed is one crossover to look for again: of two combinations, near the
// quantity where it lies at the best single figures.
type followed struct {
	first, second int
	near          float64
}

// gridStep is the ratio of neighbouring grid points less one.
const gridStep = 0.02

func newFollower(model *cost.Model, combos [][2]int, from, to float64) *follower {
	f := &follower{model: model, combos: combos}
	for q := from; q < to; q *= 1 + gridStep {
		f.grid = append(f.grid, q)
	}
	f.grid = append(f.grid, to)
	return f
}

// scene is the curves of one world, as far as they were needed.
type scene struct {
	*follower
	world  *plan.World
	curves []Curve
	totals [][]float64 // combination by grid point; 0 = not worked out yet
	solved map[bracket]float64
}

// bracket is two grid points between which a pair changes places.
type bracket struct{ first, second, low, high int }

func (f *follower) scene() *scene {
	n := len(f.combos)
	return &scene{follower: f, curves: make([]Curve, n), totals: make([][]float64, n), solved: map[bracket]float64{}}
}

// enter makes a scene that of another world.
func (s *scene) enter(w *plan.World) *scene {
	s.world = w
	for i := range s.totals {
		s.totals[i] = s.totals[i][:0]
	}
	clear(s.solved)
	return s
}

func (s *scene) total(combo, at int) float64 {
	if len(s.totals[combo]) == 0 {
		s.curves[combo] = curve(s.model.Combination(s.combos[combo][0], s.combos[combo][1], s.world))
		s.totals[combo] = slices.Grow(s.totals[combo], len(s.grid))[:len(s.grid)]
		clear(s.totals[combo])
	}
	t := &s.totals[combo][at]
	if *t == 0 {
		*t = s.curves[combo].Total(s.grid[at])
	}
	return *t
}

func (s *scene) point(x followed, at int) point {
	return point{s.grid[at], s.total(x.first, at), s.total(x.second, at)}
}

// edge is the outermost grid point so far, on one side, that is not a tie.
type edge struct {
	at   int
	sign float64 // 0 = none yet
}

// nearest is the crossing nearest to where the crossover lies nominally, in
// ratio and whichever of the two is cheaper below it; NaN if the grid has none.
// It walks outwards on both sides in steps that grow from one grid step with
// the distance and bisects the first change of sign. Two changes within one
// step are not seen.
func (s *scene) nearest(x followed) float64 {
	last := len(s.grid) - 1
	middle := min(last, max(1, sort.SearchFloat64s(s.grid, x.near)))
	var low, high edge
	for step := 0; ; step++ {
		reach := step + step*step/10
		down, up := max(0, middle-1-reach), min(last, middle+reach)
		above := s.widen(x, up, &high, &low)
		below := s.widen(x, down, &low, &high)
		if found := closer(x.near, below, above); !math.IsNaN(found) || (down == 0 && up == last) {
			return found
		}
	}
}

// widen moves one edge outwards to a grid point and solves for the crossing it
// steps over; NaN if it steps over none.
func (s *scene) widen(x followed, at int, side, other *edge) float64 {
	sign := s.point(x, at).sign()
	if sign == 0 {
		return math.NaN()
	}
	inner := *side
	*side = edge{at, sign}
	if other.sign == 0 {
		*other = *side
	}
	if inner.sign != -sign {
		return math.NaN()
	}
	return s.solve(x, min(inner.at, at), max(inner.at, at))
}

func (s *scene) solve(x followed, low, high int) float64 {
	key := bracket{x.first, x.second, low, high}
	if at, known := s.solved[key]; known {
		return at
	}
	between := search{a: s.curves[x.first], b: s.curves[x.second], left: math.MaxInt, within: 1e-7}
	upper := s.point(x, high)
	at := between.refine(s.point(x, low), upper, upper.sign()).Quantity
	s.solved[key] = at
	return at
}

// closer is the one of two quantities nearer in ratio; NaN stands for none.
func closer(to, a, b float64) float64 {
	if math.IsNaN(a) || math.Abs(math.Log(b/to)) < math.Abs(math.Log(a/to)) {
		return b
	}
	return a
}
