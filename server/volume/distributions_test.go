package volume

import (
	"math"
	"slices"
	"testing"

	"lapgate/server/volume/plan"
)

// bruteForceNearest looks at every whole quantity of a range and gives the
// last one before the change of sign nearest to a quantity in ratio.
func bruteForceNearest(a, b Curve, around float64, from, to int) float64 {
	best := math.NaN()
	for _, q := range bruteForce(a, b, from, to) {
		if at := float64(q); math.IsNaN(best) || math.Abs(math.Log(at/around)) < math.Abs(math.Log(best/around)) {
			best = at
		}
	}
	return best
}

// The pair under inspection is never the cheapest here, since escapes cost
// nothing afterwards. Its crossover lies, draw by draw, where a look at every
// whole quantity finds it.
func TestDistributionOfAPairThatIsNeverTheCheapest(t *testing.T) {
	p := rich()
	p.Outcomes.EscapeCost, p.Outcomes.Returns.ShareOfEscapes = 0, 0
	p.Inspections = p.Inspections[:2]
	p.Uncertainty.Draws = 150
	p.Quantities.To = 20000
	r := evaluate(t, p)
	at := slices.IndexFunc(r.Crossovers, func(x Crossover) bool { return x.First == 1 && x.Second == 3 })
	if at < 0 || r.Crossovers[at].WinnerTurn {
		t.Fatalf("crossover %d of turned/all and moulded/all: want one that is no turn of the cheapest", at)
	}
	x := r.Crossovers[at]
	e, err := newEvaluation(p, nil)
	if err != nil {
		t.Fatal(err)
	}
	var found []float64
	for _, w := range draw(e.knowledge, p.Uncertainty.Seed, x.Distribution.Draws) {
		a, b := e.model.Combination(0, 1, &w), e.model.Combination(1, 1, &w)
		if q := bruteForceNearest(curve(a), curve(b), x.Quantity, 350, 6000); !math.IsNaN(q) {
			found = append(found, q)
		}
	}
	want := distribution(slices.Clone(found), p.Uncertainty.Level)
	d := x.Distribution
	t.Logf("crossover at %.0f: %+v, by brute force %+v", x.Quantity, *d, *want)
	near(t, "draws", float64(d.Draws), 150, 0)
	near(t, "share", d.Share, float64(len(found))/150, 0)
	near(t, "low", d.Low, want.Low, 1)
	near(t, "median", d.Median, want.Median, 1)
	near(t, "high", d.High, want.High, 1)
	near(t, "sd", d.SD, want.SD, 1)
}

func TestEveryCrossoverHasADistribution(t *testing.T) {
	r := evaluate(t, rich())
	for i, x := range r.Crossovers {
		d := x.Distribution
		if d == nil || d.Draws != 200 || d.Share <= 0 || d.Share > 1 || d.Low > d.Median || d.Median > d.High || d.Low <= 0 {
			t.Fatalf("crossover %d at %v: distribution %+v", i, x.Quantity, d)
		}
	}
	if len(r.Crossovers) < 100 {
		t.Errorf("%d crossovers: too few to tell", len(r.Crossovers))
	}
}

// Crossovers that open a turn of the cheapest combination have all draws, the
// others share what is left, down to the least.
func TestOpenersOfTurnsHaveAllDraws(t *testing.T) {
	e := &evaluation{worlds: make([]plan.World, 10000)}
	turn := func(a, b int) Crossover { return Crossover{First: a, Second: b, WinnerTurn: true} }
	e.result.Crossovers = append([]Crossover{turn(0, 1), {First: 0, Second: 2}, turn(0, 1), turn(1, 2)}, make([]Crossover, 396)...)
	got := e.followedDraws()
	if want := []int{10000, 1000, 1000, 10000, 1000}; !slices.Equal(got[:5], want) {
		t.Errorf("draws %v, want %v", got[:5], want)
	}
	e.result.Crossovers = append(e.result.Crossovers, make([]Crossover, 9600)...)
	if got := e.followedDraws()[1]; got != fewestDraws {
		t.Errorf("%d draws among 10 000 crossovers, want %d", got, fewestDraws)
	}
	e.worlds = e.worlds[:50]
	if got := e.followedDraws()[1]; got != 50 {
		t.Errorf("%d draws of 50 worlds", got)
	}
}

func TestDistributionWithoutAnyCrossing(t *testing.T) {
	d := distribution([]float64{math.NaN(), math.NaN()}, 0.9)
	if *d != (CrossingDistribution{Draws: 2}) {
		t.Errorf("got %+v", *d)
	}
}

func TestCloserIsByRatio(t *testing.T) {
	none := math.NaN()
	for _, c := range [][3]float64{{none, 80, 80}, {90, none, 90}, {90, 120, 90}, {50, 150, 150}} {
		near(t, "closer to 100", closer(100, c[0], c[1]), c[2], 0)
	}
}

// Curves that touch and part again on the same side do not cross; those that
// part on the other side do.
func TestNearestPassesOverTies(t *testing.T) {
	flat := func(q float64) float64 { return 1000 + q }
	for after, want := range map[float64]float64{5: math.NaN(), -5: 80} {
		f := newFollower(nil, [][2]int{{0, 0}, {1, 0}}, 1, 1000)
		first := func(q float64) float64 {
			switch {
			case q <= 50:
				return flat(q) + 5
			case q <= 80:
				return flat(q)
			}
			return flat(q) + after
		}
		s := f.scene()
		s.curves = []Curve{{first, 1}, {flat, 1}}
		s.totals = [][]float64{make([]float64, len(f.grid)), make([]float64, len(f.grid))}
		for _, nominal := range []float64{2, 60, 200, 1000} {
			got := s.nearest(followed{0, 1, nominal})
			if math.IsNaN(want) != math.IsNaN(got) || math.Abs(got-want) > 1e-4 {
				t.Errorf("parting by %v, nominal %v: got %v, want %v", after, nominal, got, want)
			}
		}
	}
}
