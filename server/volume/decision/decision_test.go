package decision

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

// Source: Deming, Out of the Crisis, ch. 15; Barlow, Engineering Reliability, 5.3.
func TestAllOrNone(t *testing.T) {
	near(t, "break-even", AllOrNoneBreakEven(.25, 50), .005, 1e-15)
	near(t, "none at .002", CostWithout(.002, 50), .10, 1e-15)
	near(t, "none at .01", CostWithout(.01, 50), .50, 1e-15)
	near(t, "with replacement", CostAllWithReplacement(.01, .25), .252525, 1e-6)
	if AllOrNone(.002, .25, 50) != InspectNone || AllOrNone(.01, .25, 50) != InspectAll {
		t.Error("the rule advises the wrong depth")
	}
	// Constructed from the rule by expectation.
	near(t, "imperfect", CostImperfect(.01, .25, 50, .05, .02, 8), .4334, 1e-12)
}

// Source: published exercise, .200 +- .020, repair 150; and 100 at 1 mm.
func TestTaguchi(t *testing.T) {
	loss, err := NewTaguchi(.200, .020, 150)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "k", loss.K, 375000, 1e-6)
	near(t, "L(.21)", loss.Loss(.21), 37.5, 1e-9)
	near(t, "mean", loss.MeanLoss(.203, .005), 12.75, 1e-9)
	second, _ := NewTaguchi(0, 1, 100)
	near(t, "L(.5)", second.Loss(.5), 25, 1e-12)
	if _, err := NewTaguchi(0, 0, 1); err == nil {
		t.Error("no tolerance was accepted")
	}
}

// Constructed example in the manner of SEMI E35, re-computed.
func TestOwnership(t *testing.T) {
	o := Ownership{FixedPerYear: 1.2e6 / 5, RunningPerYear: 80000, ThroughputPerHour: 600, HoursPerYear: 8760,
		Uptime: .85, Utilisation: .8, Yield: .97}
	near(t, "cost", o.CostPerGoodUnit(), .0923026, 1e-7)
}

// Standard formula, re-computed: per good unit and per start differ by 4 %.
func TestCrossover(t *testing.T) {
	perGood, ok := Crossover(2000, 12/.80, 50000, 3/.95)
	near(t, "per good", perGood, 4053.3333, 1e-3)
	near(t, "cost there", 2000/perGood+15, 15.49342, 1e-5)
	// Tooling over starts, then divided by yield: (T/N+v)/y.
	perStart, _ := Crossover(2000/.80, 12/.80, 50000/.95, 3/.95)
	near(t, "per start", perStart, 4233.3333, 1e-3)
	if _, same := Crossover(1, 2, 3, 2); !ok || same {
		t.Error("parallel lines meet, or crossing ones do not")
	}
}

// Three cases against brute-force simulation with committed seeds: draw the
// truth, draw the sample, choose at the posterior mean, pay the true cost.
func TestSampleInformationAgainstSimulation(t *testing.T) {
	for _, c := range []struct {
		a, b        Line
		alpha, beta float64
		n           int
		seed        uint64
	}{
		{Line{0, 50}, Line{.25, 0}, 2, 300, 500, 11},
		{Line{100, -40}, Line{80, -15}, 8, 2, 200, 12},
		{Line{10, 5}, Line{12, 0}, 4, 6, 10, 13},
	} {
		closed := SampleLinear(c.a, c.b, c.alpha, c.beta, c.n)
		mean, se := simulateSample(c.a, c.b, c.alpha, c.beta, c.n, c.seed)
		near(t, "EVSI", closed, mean, 4*se)
		if closed <= 0 || closed > PerfectLinear(c.a, c.b, c.alpha, c.beta) {
			t.Errorf("EVSI %v outside 0..EVPI", closed)
		}
		if mean < 5*se {
			t.Errorf("simulation too coarse to tell: %v +- %v", mean, se)
		}
	}
}

// simulateSample pairs the choice with and without the sample in each world.
func simulateSample(a, b Line, alpha, beta float64, n int, seed uint64) (mean, se float64) {
	const worlds = 200_000
	src := rand.NewPCG(seed, 0)
	prior := distuv.Beta{Alpha: alpha, Beta: beta, Src: src}
	blind := a
	if m := prior.Mean(); b.At(m) < a.At(m) {
		blind = b
	}
	var sum, squares float64
	for range worlds {
		p := prior.Rand()
		k := distuv.Binomial{N: float64(n), P: p, Src: src}.Rand()
		seen, m := a, (alpha+k)/(alpha+beta+float64(n))
		if b.At(m) < a.At(m) {
			seen = b
		}
		gain := blind.At(p) - seen.At(p)
		sum, squares = sum+gain, squares+gain*gain
	}
	mean = sum / worlds
	return mean, math.Sqrt((squares/worlds - mean*mean) / worlds)
}

// The closed perfect value against quadrature over the prior's quantiles, and
// the point form against both closed forms.
func TestPointsAgreeWithClosedForms(t *testing.T) {
	a, b := Line{0, 50}, Line{.25, 0}
	prior := distuv.Beta{Alpha: 2, Beta: 300}
	const points = 4000
	nodes := Nodes{Cost: make([][]float64, 2)}
	for j := range points {
		p := prior.Quantile((float64(j) + .5) / points)
		nodes.Success = append(nodes.Success, p)
		nodes.Cost[0] = append(nodes.Cost[0], a.At(p))
		nodes.Cost[1] = append(nodes.Cost[1], b.At(p))
	}
	if err := nodes.Check(); err != nil {
		t.Fatal(err)
	}
	near(t, "EVPI", nodes.Perfect(), PerfectLinear(a, b, 2, 300), 2e-5)
	near(t, "EVSI 500", nodes.Sample(500), SampleLinear(a, b, 2, 300, 500), 2e-4)
	// Fifty clean units leave the mean above the break-even: worth nothing.
	near(t, "EVSI 50", SampleLinear(a, b, 2, 300, 50), 0, 1e-12)
}

func TestMoreInformationIsNeverWorthLess(t *testing.T) {
	a, b := Line{100, -40}, Line{80, -15}
	last := 0.0
	for _, n := range []int{0, 1, 5, 50, 200, 1000, 20000} {
		v := SampleLinear(a, b, 8, 2, n)
		if v < last-1e-9 {
			t.Errorf("EVSI falls to %v at n %d", v, n)
		}
		last = v
	}
	near(t, "limit is EVPI", last, PerfectLinear(a, b, 8, 2), 1e-3)
}

func TestBetaBinomialSumsToOne(t *testing.T) {
	sum := 0.0
	for k := range 201 {
		sum += BetaBinomial(k, 200, 2.5, .5)
	}
	near(t, "sum", sum, 1, 1e-10)
	near(t, "uniform prior", BetaBinomial(3, 9, 1, 1), .1, 1e-13)
}

func TestRaggedNodesAreRefused(t *testing.T) {
	if (Nodes{Success: []float64{.5}, Cost: [][]float64{{1, 2}}}).Check() == nil || (Nodes{}).Check() == nil {
		t.Error("ragged points were accepted")
	}
}
