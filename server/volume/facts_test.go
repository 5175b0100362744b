package volume

import (
	"testing"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// onlyCrossing is the one crossing of the first two combinations.
func onlyCrossing(t *testing.T, p *plan.Plan) float64 {
	t.Helper()
	at := curvesOf(t, p)
	found, complete := Crossings(curve(at[0]), curve(at[1]), 1, 1e6, 100000)
	if !complete || len(found) != 1 {
		t.Fatalf("found %+v, complete %v; want one crossing", found, complete)
	}
	return found[0].Quantity
}

// Source: common practice: a turned plastic lens at 1 000 each against a mould
// of 50 000 and 2 each meet just past 50 units.
func TestTurnedLensAgainstMould(t *testing.T) {
	got := onlyCrossing(t, planOf(simple("turned", 0, 1000, 1), simple("moulded", 50000, 2, 1)))
	near(t, "crossing", got, 50000./998, 1e-6)
}

// Source: common practice: 50 000 of tooling over 1 000 units adds 50 a unit.
func TestToolingPerUnit(t *testing.T) {
	near(t, "tooling", curvesOf(t, planOf(simple("moulded", 50000, 2, 1)))[0].Parts(1000).Over(1000).Tooling, 50, 1e-12)
}

// Source: common practice: 40 each with 10 000 of tooling against 25 each with
// 40 000 meet at 2 000 when both yields are 1; a quoted crossover of about
// 2 600 is explained by a yield of the second near 0.88.
func TestQuotedCrossoverIsExplainedByYield(t *testing.T) {
	p := planOf(simple("a", 10000, 40, 1), simple("b", 40000, 25, 1))
	near(t, "crossing", onlyCrossing(t, p), 2000, 1e-6)
	b, err := SolveBreakEven(p, "processes.b.yield", Combination{"a", "none"}, Combination{"b", "none"}, 2600)
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Values) != 1 {
		t.Fatalf("values %+v; want one", b.Values)
	}
	near(t, "yield", b.Values[0].Value, 25/(40-30000./2600), 1e-9)
	near(t, "yield near", b.Values[0].Value, 0.88, 0.005)
	near(t, "cost there", float64(b.Values[0].Cost), 40+10000./2600, 1e-6)
}

// Source: standard crossover formula, re-computed, per good unit.
func TestCrossoverPerGoodUnit(t *testing.T) {
	p := planOf(simple("a", 2000, 12, .80), simple("b", 50000, 3, .95))
	got := onlyCrossing(t, p)
	near(t, "crossing", got, 4053.3333, 1e-3)
	near(t, "cost", curvesOf(t, p)[1].PerGood(got), 15.49342, 1e-5)
}

func TestBreakEvenOfEveryKindOfUnknown(t *testing.T) {
	p := rich()
	for path := range map[string]bool{"outcomes.escape_cost": true, "processes.moulded.tooling_cost": true,
		"processes.turned.cost_per_start": true, "inspections.all.miss": true, "inspections.all.cycle_time_s": true,
		"reworks.repolish.cost": true, "processes.turned.learning_rate": true} {
		b, err := SolveBreakEven(p, path, Combination{"turned", "all"}, Combination{"moulded", "none"}, 900)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range b.Values {
			u, _ := p.Unknown(path)
			s := &balance{plan: p, unknown: u, quantity: 900, model: &cost.Model{}, first: [2]int{0, 1}, second: [2]int{1, 0}}
			at, err := s.at(v.Value)
			if err != nil {
				t.Fatal(err)
			}
			if !v.Jump {
				near(t, path, at.a, at.b, 1e-7*at.a)
			}
		}
	}
	if _, err := SolveBreakEven(p, "processes.turned.colour", Combination{"turned", "all"}, Combination{"moulded", "none"}, 900); err == nil {
		t.Error("an unknown that does not exist was solved for")
	}
	if _, err := SolveBreakEven(p, "outcomes.escape_cost", Combination{"cast", "all"}, Combination{"moulded", "none"}, 900); err == nil {
		t.Error("a process that does not exist was accepted")
	}
}
