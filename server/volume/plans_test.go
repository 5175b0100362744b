package volume

import (
	"context"
	"math"
	"testing"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

func value(v float64) plan.Share { return plan.Share{Value: &v} }

func count(k, n int) plan.Share { return plan.Share{Count: &plan.Count{K: k, N: n}} }

// simple is a process of tooling, price per start and a certain yield.
func simple(name string, tooling, perStart, yield float64) plan.Process {
	return plan.Process{Name: name, ToolingCost: tooling, CostPerStart: []plan.PriceBreak{{FromStarts: 1, Cost: perStart}},
		Yield: plan.Yield{Value: &yield}}
}

// planOf is the smallest plan around some processes: nothing is inspected.
func planOf(processes ...plan.Process) *plan.Plan {
	return &plan.Plan{Format: plan.Format, Name: "test", Currency: "EUR",
		WorkingTime: plan.WorkingTime{HoursPerPeriod: 1600, PeriodsPerYear: 1, LabourCostPerHour: 30},
		Quantities:  plan.Quantities{From: 10, To: 100000, Points: 9},
		Uncertainty: plan.Uncertainty{Draws: 200, Seed: 7, Level: 0.9},
		Processes:   processes,
		Inspections: []plan.Inspection{{Name: "none", Kind: plan.None}}}
}

// full inspects every unit.
func full(name string, falseReject, miss plan.Share) plan.Inspection {
	return plan.Inspection{Name: name, Kind: plan.Full, FalseReject: falseReject, Miss: miss,
		Station: plan.Station{Price: 60000, LifeYears: 6, CycleTimeS: 12, Crew: 0.5, Uptime: 0.9}}
}

// rich has everything at once: breaks, lots, streams, reworks, learning.
func rich() *plan.Plan {
	turned := simple("turned", 2000, 40, 0.82)
	turned.CostPerStart = append(turned.CostPerStart, plan.PriceBreak{FromStarts: 500, Cost: 33}, plan.PriceBreak{FromStarts: 5000, Cost: 29})
	turned.Learning = &plan.Learning{Convention: "crawford", Rate: 0.9, Share: 0.5}
	turned.Yield = plan.Yield{Count: &plan.Count{K: 410, N: 500}}
	moulded := simple("moulded", 30000, 5, 0.9)
	moulded.ToolingLifeStarts, moulded.RepairEveryStarts, moulded.RepairCost = 20000, 4000, 900
	moulded.SetupCost, moulded.BatchSize, moulded.BlockSize, moulded.FirstArticleCost = 150, 400, 4, 800
	moulded.Yield = plan.Yield{Beta: &plan.Beta{Alpha: 90, Beta: 10}}
	p := planOf(turned, moulded)
	p.Outcomes = plan.Outcomes{Price: 90, ScrapValue: 1, EscapeCost: 120, Returns: plan.Returns{ShareOfEscapes: 0.3, Cost: 60}}
	p.Reworks = []plan.Rework{{Name: "repolish", Cost: 6, Success: count(30, 50), Then: "scrap"}}
	all := full("all", count(4, 300), count(5, 90))
	all.Rework, all.Hold = "repolish", plan.Hold{Share: 0.02, Cost: 1, Minutes: 4}
	same := 0.4
	twice := full("twice", count(4, 300), count(5, 90))
	twice.Kind, twice.SameResultShare, twice.Station.Charge = plan.TwiceEither, &same, plan.Dedicated
	majority := full("majority", count(4, 300), count(5, 90))
	majority.Kind, majority.SameResultShare = plan.TwiceMajority, &same
	lots := full("lots", count(4, 300), count(5, 90))
	lots.Kind, lots.ISO2859 = plan.ISO2859, &plan.Lots{Level: "II", AQLPercent: 1, LotSize: 500, RejectedLots: plan.ScreenLot}
	stream := full("stream", count(4, 300), count(5, 90))
	stream.Kind, stream.CSP1 = plan.CSP, &plan.Stream{Clearance: 21, Fraction: 0.1}
	p.Inspections = append(p.Inspections, all, twice, majority, lots, stream)
	return p
}

// curvesOf are the total costs of a plan's combinations at the best figures.
func curvesOf(t *testing.T, p *plan.Plan) []*cost.Combination {
	t.Helper()
	e, err := newEvaluation(p, nil)
	if err != nil {
		t.Fatal(err)
	}
	return e.at
}

func evaluate(t *testing.T, p *plan.Plan, quantities ...float64) *Result {
	t.Helper()
	r, err := Evaluate(context.Background(), p, quantities, nil)
	if err != nil {
		t.Fatal(err)
	}
	return r
}
