package volume

import (
	"math"
	"testing"

	"lapgate/server/volume/plan"
)

// scaled is the plan in another currency.
func scaled(p *plan.Plan, x float64) *plan.Plan {
	p.WorkingTime.LabourCostPerHour *= x
	o := &p.Outcomes
	o.Price, o.ScrapValue, o.EscapeCost, o.Returns.Cost = o.Price*x, o.ScrapValue*x, o.EscapeCost*x, o.Returns.Cost*x
	for i := range p.Reworks {
		p.Reworks[i].Cost *= x
	}
	for i := range p.Processes {
		a := &p.Processes[i]
		a.ToolingCost, a.RepairCost, a.FirstArticleCost, a.SetupCost = a.ToolingCost*x, a.RepairCost*x, a.FirstArticleCost*x, a.SetupCost*x
		for j := range a.CostPerStart {
			a.CostPerStart[j].Cost *= x
		}
	}
	for i := range p.Inspections {
		s := &p.Inspections[i].Station
		s.Price, s.RunningCostPerHour, s.CostPerLook = s.Price*x, s.RunningCostPerHour*x, s.CostPerLook*x
		p.Inspections[i].Hold.Cost *= x
	}
	return p
}

func TestCurrencyOnlyScalesCosts(t *testing.T) {
	a, b := evaluate(t, rich(), 900), evaluate(t, scaled(rich(), 117.3), 900)
	for i, q := range a.Quantities {
		for c, cell := range q.Cells {
			other := b.Quantities[i].Cells[c]
			near(t, "cost", float64(other.Cost)/float64(cell.Cost), 117.3, 1e-9)
			near(t, "high", float64(other.High)/float64(cell.High), 117.3, 1e-9)
			near(t, "starts", other.Starts, cell.Starts, 0)
		}
	}
	if len(a.Crossovers) == 0 || len(a.Crossovers) != len(b.Crossovers) {
		t.Fatalf("%d crossovers became %d", len(a.Crossovers), len(b.Crossovers))
	}
	for i := range a.Crossovers {
		near(t, "crossover", b.Crossovers[i].Quantity, a.Crossovers[i].Quantity, 1e-6*a.Crossovers[i].Quantity)
	}
}

func TestPartsAddUpToTheCost(t *testing.T) {
	for _, q := range evaluate(t, rich()).Quantities {
		for _, cell := range q.Cells {
			near(t, "parts", cell.Parts.Total(), float64(cell.Cost), 1e-9*float64(cell.Cost))
		}
	}
}

// bruteForce counts sign changes on every whole quantity.
func bruteForce(a, b Curve, from, to int) []int {
	var found []int
	last := 0.0
	for q := from; q <= to; q++ {
		d := point{float64(q), a.Total(float64(q)), b.Total(float64(q))}.sign()
		if d != 0 && last == -d {
			found = append(found, q)
		}
		if d != 0 {
			last = d
		}
	}
	return found
}

// Every pair of a plan with every kind of step: the solver finds the changes
// a look at every whole quantity finds, no more and no fewer.
func TestCrossingsEqualBruteForce(t *testing.T) {
	at := curvesOf(t, rich())
	seen := map[string]int{}
	for i := range at {
		for j := range i {
			a, b := curve(at[i]), curve(at[j])
			want := bruteForce(a, b, 3, 15000)
			got, complete := Crossings(a, b, 3, 15000, 10_000_000)
			if !complete || len(got) != len(want) {
				t.Errorf("pair %d %d: %d crossings, want %d", i, j, len(got), len(want))
				continue
			}
			for k := range got {
				if got[k].Quantity < float64(want[k]-1) || got[k].Quantity > float64(want[k]) {
					t.Errorf("pair %d %d: crossing at %v, want just below %d", i, j, got[k].Quantity, want[k])
				}
			}
			seen[[]string{"none", "one", "several"}[min(2, len(want))]]++
		}
	}
	for _, kind := range []string{"none", "one", "several"} {
		if seen[kind] == 0 {
			t.Errorf("no pair with %s crossing in the test: %v", kind, seen)
		}
	}
}

func TestTotalsNeverFallWithQuantity(t *testing.T) {
	for c, combination := range curvesOf(t, rich()) {
		last := 0.0
		for q := combination.MonotoneFrom(); q < 60000; q += 13.7 {
			total := combination.Total(q)
			if total < last*(1-1e-12) {
				t.Fatalf("combination %d: total falls at %v", c, q)
			}
			last = total
		}
	}
}

// Sampling is left out: a worse process makes it screen more lots, which can
// save escapes worth more than the yield.
func TestMoreYieldNeverCostsMore(t *testing.T) {
	p := rich()
	for i := range p.Processes {
		for j, option := range p.Inspections {
			if option.Kind == plan.ISO2859 || option.Kind == plan.CSP {
				continue
			}
			for _, quantity := range []float64{12, 480, 505, 4990, 70000} {
				last := math.Inf(1)
				for y := 0.05; y <= 1; y += 0.025 {
					p.Processes[i].Yield = plan.Yield{Value: &y}
					e, err := newEvaluation(p, nil)
					if err != nil {
						t.Fatal(err)
					}
					total := e.at[i*len(p.Inspections)+j].Total(quantity)
					if total > last*(1+1e-12) {
						t.Fatalf("%s under %s: dearer at yield %v", p.Processes[i].Name, option.Name, y)
					}
					last = total
				}
			}
		}
	}
}

// Closed form: without inspection the cost is T/G + v/y, and for y ~
// Beta(a, b) the mean of 1/y is (a+b-1)/(a-1).
func TestMonteCarloMeanAgainstClosedForm(t *testing.T) {
	process := simple("a", 2000, 12, 1)
	process.Yield = plan.Yield{Beta: &plan.Beta{Alpha: 18, Beta: 6}}
	p := planOf(process)
	p.Uncertainty.Draws = 20000
	for _, q := range evaluate(t, p).Quantities {
		cell := q.Cells[0]
		near(t, "mean", float64(cell.Mean), 2000/q.Good+12*23./17, 4*float64(cell.StandardErrorOfAvg))
		near(t, "nominal", float64(cell.Cost), 2000/q.Good+12/0.75, 1e-9)
	}
}

func TestSameSeedSameResult(t *testing.T) {
	a, b := evaluate(t, rich()), evaluate(t, rich())
	for i, q := range a.Quantities {
		for c := range q.Cells {
			if q.Cells[c] != b.Quantities[i].Cells[c] && q.Cells[c].ProfitPerGood == nil {
				t.Fatalf("quantity %v: results differ", q.Good)
			}
			near(t, "chance", b.Quantities[i].Cells[c].ChanceBest, q.Cells[c].ChanceBest, 0)
			near(t, "high", float64(b.Quantities[i].Cells[c].High), float64(q.Cells[c].High), 0)
		}
	}
}

func TestChancesAddUpToOne(t *testing.T) {
	for _, q := range evaluate(t, rich()).Quantities {
		sum := 0.0
		for _, cell := range q.Cells {
			sum += cell.ChanceBest
		}
		near(t, "chances", sum, 1, 1e-9)
	}
}
