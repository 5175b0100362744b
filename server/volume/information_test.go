package volume

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"lapgate/server/volume/plan"
)

// chooser is a plan whose best process is in doubt at 7 000 units.
func chooser(alpha, beta float64) *plan.Plan {
	p := planOf(simple("a", 2000, 12, .8), simple("b", 20000, 11, .9))
	p.Processes[1].Yield = plan.Yield{Beta: &plan.Beta{Alpha: alpha, Beta: beta}}
	return p
}

// Brute force in three cases: draw the yield, draw the sample, choose by the
// closed posterior mean of 1/y, pay by the true yield.
func TestWorthOfSampleAgainstSimulation(t *testing.T) {
	for _, c := range []struct {
		alpha, beta, good float64
		units             int
	}{{18, 2, 7000, 50}, {27, 3, 6000, 200}, {18, 2, 9000, 1000}} {
		p := chooser(c.alpha, c.beta)
		r := evaluate(t, p, c.good)
		got := math.NaN()
		for _, s := range r.Information[0].Samples {
			if s.Units == c.units {
				got = s.Worth
			}
		}
		mean, se := simulateWorth(c.alpha, c.beta, c.good, c.units)
		near(t, "worth", got, mean, 4*se+0.02*mean)
		if mean < 6*se {
			t.Errorf("simulation too coarse to tell: %v +- %v", mean, se)
		}
		if got > r.Information[0].Inputs[0].Perfect {
			t.Error("a sample is worth more than the truth")
		}
	}
}

func simulateWorth(alpha, beta, good float64, units int) (mean, se float64) {
	const worlds = 60_000
	src := rand.NewPCG(41, uint64(units))
	a := 2000 + 12*good/.8
	b := func(inverse float64) float64 { return 20000 + 11*good*inverse }
	inverse := func(al, be float64) float64 { return (al + be - 1) / (al - 1) }
	blindB := b(inverse(alpha, beta)) < a
	var sum, squares float64
	for range worlds {
		y := distuv.Beta{Alpha: alpha, Beta: beta, Src: src}.Rand()
		k := distuv.Binomial{N: float64(units), P: y, Src: src}.Rand()
		seeB := b(inverse(alpha+k, beta+float64(units)-k)) < a
		pay := map[bool]float64{false: a, true: b(1 / y)}
		gain := pay[blindB] - pay[seeB]
		sum, squares = sum+gain, squares+gain*gain
	}
	mean = sum / worlds
	return mean, math.Sqrt((squares/worlds - mean*mean) / worlds)
}

func TestCertainPlanHasNothingToLearn(t *testing.T) {
	r := evaluate(t, planOf(simple("a", 2000, 12, .8), simple("b", 20000, 11, .9)), 7000)
	near(t, "perfect", r.Information[0].Perfect, 0, 1e-6)
	if len(r.Information[0].Inputs) != 0 {
		t.Error("a certain input is listed")
	}
}

// Source: Deming, Out of the Crisis, ch. 15: with perfect looks at .25 and
// escapes at 50 the break-even is .005; the full model agrees where making
// costs nothing.
func TestAllOrNoneAgreesWithTheModel(t *testing.T) {
	for _, bad := range []float64{.002, .01} {
		p := planOf(simple("a", 0, 0, 1-bad))
		all := full("all", value(0), value(0))
		all.Station = plan.Station{CostPerLook: .25}
		p.Inspections = append(p.Inspections, all)
		p.Outcomes.EscapeCost = 50
		got := evaluate(t, p).AllOrNone
		if len(got) != 1 {
			t.Fatalf("%+v", got)
		}
		near(t, "break-even", got[0].BreakEven, .005, 1e-12)
		if got[0].Rule != got[0].Model {
			t.Errorf("bad %v: rule %s, model %s", bad, got[0].Rule, got[0].Model)
		}
	}
}
