package cost

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/server/volume/decision"
	"lapgate/server/volume/plan"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

// basePlan has one process with one inspection option and one rework route.
func basePlan(option plan.Inspection) *plan.Plan {
	return &plan.Plan{
		WorkingTime: plan.WorkingTime{HoursPerPeriod: 1600, PeriodsPerYear: 1, LabourCostPerHour: 30},
		Outcomes:    plan.Outcomes{ScrapValue: 1, EscapeCost: 100, Returns: plan.Returns{ShareOfEscapes: .5, Cost: 40}},
		Reworks:     []plan.Rework{{Name: "repolish", Cost: 6}, {Name: "again", Cost: 9, Then: "repolish"}},
		Processes:   []plan.Process{{Name: "p", ToolingCost: 1000, CostPerStart: []plan.PriceBreak{{FromStarts: 1, Cost: 10}}}},
		Inspections: []plan.Inspection{option},
	}
}

func world(yield, falseReject, miss float64, success ...float64) *plan.World {
	return &plan.World{Yield: []float64{yield}, FalseReject: []float64{falseReject}, Miss: []float64{miss}, Success: append(success, .5, .5)}
}

func combine(t *testing.T, p *plan.Plan, w *plan.World) *Combination {
	t.Helper()
	m, err := NewModel(p)
	if err != nil {
		t.Fatal(err)
	}
	return m.Combination(0, 0, w)
}

func options() map[string]plan.Inspection {
	same := .3
	return map[string]plan.Inspection{
		"none":     {Kind: plan.None},
		"full":     {Kind: plan.Full},
		"either":   {Kind: plan.TwiceEither, SameResultShare: &same},
		"majority": {Kind: plan.TwiceMajority, SameResultShare: &same},
		"screened": {Kind: plan.ISO2859, ISO2859: &plan.Lots{Level: "II", AQLPercent: 1, LotSize: 300, RejectedLots: plan.ScreenLot}},
		"scrapped": {Kind: plan.ISO2859, ISO2859: &plan.Lots{Level: "II", AQLPercent: 4, LotSize: 300, RejectedLots: plan.ScrapLot}},
		"stream":   {Kind: plan.CSP, CSP1: &plan.Stream{Clearance: 14, Fraction: .2}},
		"reworked": {Kind: plan.Full, Rework: "again"},
	}
}

// Every flow against brute force: single units are made, looked at, reworked
// and counted, lot by lot or in a stream.
func TestFlowsAgainstSimulation(t *testing.T) {
	for name, option := range options() {
		w := world(.93, .04, .15, .5, .7)
		got := combine(t, basePlan(option), w).Flow(1e6)
		near(t, name+" adds up", got.Good+got.Escapes+got.FalseRejects+got.Scrapped, 1, 1e-12)
		want, se := simulate(option, w)
		for i, what := range []string{"good", "escapes", "false rejects", "scrapped", "inspected", "looks", "reworked"} {
			near(t, name+" "+what, fields(got)[i], want[i], 5*se[i]+1e-12)
			if se[i] > .01 {
				t.Errorf("%s %s: simulation too coarse, %v", name, what, se[i])
			}
		}
	}
}

func fields(f Flow) [7]float64 {
	return [7]float64{f.Good, f.Escapes, f.FalseRejects, f.Scrapped, f.Inspected, f.Looks, f.Reworked}
}

// simulate counts fates of single units per unit made, with the standard
// error of each over the lots.
func simulate(option plan.Inspection, w *plan.World) (mean, se [7]float64) {
	s := &line{r: rand.New(rand.NewPCG(5, 6)), option: option, w: w}
	const lots, lot = 4000, 300
	var squares [7]float64
	for range lots {
		s.flow = Flow{}
		s.lot(lot)
		for i, v := range fields(s.flow) {
			mean[i] += v / lot / lots
			squares[i] += v / lot * v / lot / lots
		}
	}
	for i := range se {
		se[i] = math.Sqrt(math.Max(0, squares[i]-mean[i]*mean[i]) / lots)
	}
	return mean, se
}

type line struct {
	r      *rand.Rand
	option plan.Inspection
	w      *plan.World
	flow   Flow
	run    int // conforming verdicts in a row, CSP-1
	sample bool
}

func (s *line) chance(p float64) bool { return s.r.Float64() < p }

// look is one look at a unit.
func (s *line) look(good bool) (rejected bool) {
	s.flow.Looks++
	if good {
		return s.chance(s.w.FalseReject[0])
	}
	return !s.chance(s.w.Miss[0])
}

func (s *line) verdict(good bool) (rejected bool) {
	s.flow.Inspected++
	first := s.look(good)
	if s.option.SameResultShare == nil {
		return first
	}
	if s.chance(*s.option.SameResultShare) {
		s.flow.Looks++
		return first
	}
	second := s.look(good)
	if s.option.Kind == plan.TwiceEither {
		return first || second
	}
	if first != second {
		return s.look(good)
	}
	return first
}

func (s *line) count(good, shipped bool) {
	switch {
	case good && shipped:
		s.flow.Good++
	case shipped:
		s.flow.Escapes++
	case good:
		s.flow.FalseRejects++
	default:
		s.flow.Scrapped++
	}
}

// rejected sends a unit along "again" then "repolish" where there is rework.
func (s *line) rejected(good bool) {
	if s.option.Rework != "" {
		for _, route := range []int{1, 0} {
			s.flow.Reworked++
			good = good || s.chance(s.w.Success[route])
			if !s.verdict(good) {
				s.count(good, true)
				return
			}
		}
	}
	s.count(good, false)
}

func (s *line) inspect(good bool) (rejected bool) {
	if s.verdict(good) {
		s.rejected(good)
		return true
	}
	s.count(good, true)
	return false
}

func (s *line) lot(n int) {
	made := make([]bool, n)
	for i := range made {
		made[i] = s.chance(s.w.Yield[0])
	}
	switch s.option.Kind {
	case plan.None:
		for _, good := range made {
			s.count(good, true)
		}
	case plan.ISO2859:
		s.sampleLot(made)
	case plan.CSP:
		s.stream(made)
	default:
		for _, good := range made {
			s.inspect(good)
		}
	}
}

// sampleLot: letter H for lots of 300 at level II. Source: ISO 2859-1: AQL 1.0
// is n 50 Ac 1, AQL 4.0 is n 50 Ac 5.
func (s *line) sampleLot(made []bool) {
	accept := map[float64]int{1: 1, 4: 5}[s.option.ISO2859.AQLPercent]
	bad, passed := 0, []bool{}
	scrap := s.option.ISO2859.RejectedLots == plan.ScrapLot
	for _, good := range made[:50] {
		if s.verdict(good) {
			bad++
			s.rejected(good)
		} else {
			passed = append(passed, good)
		}
	}
	for _, good := range passed {
		s.count(good, bad <= accept || !scrap)
	}
	for _, good := range made[50:] {
		switch {
		case bad <= accept:
			s.count(good, true)
		case scrap:
			s.count(good, false)
		default:
			s.inspect(good)
		}
	}
}

func (s *line) stream(made []bool) {
	for _, good := range made {
		switch {
		case s.sample && !s.chance(s.option.CSP1.Fraction):
			s.count(good, true)
		case s.inspect(good):
			s.run, s.sample = 0, false
		case !s.sample:
			s.run++
			s.sample = s.run >= s.option.CSP1.Clearance
		}
	}
}

// Source: constructed from the all-or-none rule: k1 .25, p .01, miss .05, k2
// 50, false reject .02, value 8 gives .4334 per unit made.
func TestInspectionEconomicsOfOneUnit(t *testing.T) {
	p := basePlan(plan.Inspection{Kind: plan.Full, Station: plan.Station{CostPerLook: .25}})
	p.Outcomes = plan.Outcomes{EscapeCost: 50}
	c := combine(t, p, world(.99, .02, .05))
	parts := c.Parts(1000).Over(c.Starts(1000))
	falseReject := c.Flow(1000).FalseRejects * 8
	escape := c.Flow(1000).Escapes * c.EscapeCost()
	near(t, "cost", parts.Inspection+escape+falseReject, decision.CostImperfect(.01, .25, 50, .05, .02, 8), 1e-12)
	near(t, "cost", parts.Inspection+escape+falseReject, .4334, 1e-12)
}

func TestStartsComeInBlocksToolsWearOut(t *testing.T) {
	p := basePlan(plan.Inspection{Kind: plan.None})
	x := &p.Processes[0]
	x.BlockSize, x.ToolingLifeStarts, x.RepairEveryStarts, x.RepairCost = 8, 100, 40, 7
	x.FirstArticleCost, x.SetupCost, x.BatchSize = 50, 3, 16
	c := combine(t, p, world(.5, 0, 0))
	near(t, "starts", c.Starts(101), 208, 0) // 202 in blocks of 8
	// Three sets, two repairs in each full life (at 40 and 80), none in the last 8.
	near(t, "tooling", c.Parts(101).Tooling, 3*1050+2*2*7, 1e-9)
	near(t, "making", c.Parts(101).Making+c.Parts(101).Escapes-104*120, 208*10+13*3, 1e-9)
}

func TestBuyingUpToAPriceBreak(t *testing.T) {
	p := basePlan(plan.Inspection{Kind: plan.None})
	p.Processes[0].CostPerStart = append(p.Processes[0].CostPerStart, plan.PriceBreak{FromStarts: 100, Cost: 8})
	c := combine(t, p, world(1, 0, 0))
	near(t, "short of it", c.Parts(79).Making, 790, 1e-9)
	near(t, "bought up", c.Parts(90).Making, 800, 1e-9)
	near(t, "past it", c.Parts(120).Making, 960, 1e-9)
}

// Source: 80 % tables: ten units of Crawford cost 6.315373 first units, of
// Wright 4.765099.
func TestLearningByConvention(t *testing.T) {
	for convention, want := range map[string]float64{"crawford": 63.15373, "wright": 47.65099} {
		p := basePlan(plan.Inspection{Kind: plan.None})
		p.Processes[0].Learning = &plan.Learning{Convention: convention, Rate: .8, Share: 1}
		near(t, convention, combine(t, p, world(1, 0, 0)).Parts(10).Making, want, 1e-4)
	}
	p := basePlan(plan.Inspection{Kind: plan.None})
	p.Processes[0].Learning = &plan.Learning{Convention: "crawford", Rate: .8, Share: 1, PricedAt: 10}
	near(t, "priced at the tenth", combine(t, p, world(1, 0, 0)).Parts(10).Making, 63.15373/.476510, 1e-3)
}

func TestStationsKeepPaceAndWait(t *testing.T) {
	station := plan.Station{Price: 1000, LifeYears: 2, CycleTimeS: 36, Uptime: .9, Charge: plan.Dedicated}
	p := basePlan(plan.Inspection{Kind: plan.Full, Station: station})
	c := combine(t, p, world(1, 0, 0))
	s, err := c.Stations(230400)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "load", s.Load, 1.6, 1e-12) // 230 400 looks of 40 s in 1 600 h
	near(t, "takt", s.TaktS, 25, 1e-9)
	near(t, "wait", s.WaitS, 40*.903284, 1e-4) // M/D/2 at 1.6, re-computed
	near(t, "chance of a wait", s.Waiting, .711111, 1e-6)
	near(t, "price", c.Parts(230400).Inspection, 2000, 1e-9)
	p.Inspections[0].Station.MaxWaitS = 20
	if s, _ = combine(t, p, world(1, 0, 0)).Stations(230400); s.Count != 3 || !s.WaitAsked || s.WaitS > 20 {
		t.Errorf("%+v; want three stations", s)
	}
	p.Demand.UnitsPerPeriod = 115200
	p.Inspections[0].Station.MaxWaitS = 0
	near(t, "renewed after two years", combine(t, p, world(1, 0, 0)).Parts(115200*6).Inspection, 3*1000, 1e-9)
}

// The formula of the cost of ownership: price over life, hours and uptime.
func TestStationPriceByUse(t *testing.T) {
	station := plan.Station{Price: 1.2e6, LifeYears: 5, CycleTimeS: 6, Uptime: .85, RunningCostPerHour: 9.14}
	p := basePlan(plan.Inspection{Kind: plan.Full, Station: station})
	p.WorkingTime.HoursPerPeriod = 8760 * .8
	o := decision.Ownership{FixedPerYear: 1.2e6 / 5, RunningPerYear: 9.14 * 8760 * .8, ThroughputPerHour: 600,
		HoursPerYear: 8760, Uptime: .85, Utilisation: .8, Yield: 1}
	near(t, "per look", combine(t, p, world(1, 0, 0)).LookCost(), o.CostPerGoodUnit(), 1e-9)
}

func TestNothingGoodNeverShips(t *testing.T) {
	c := combine(t, basePlan(plan.Inspection{Kind: plan.None}), world(0, 0, 0))
	if !math.IsInf(c.Starts(10), 1) || !math.IsInf(c.PerGood(10), 1) {
		t.Error("a yield of zero has a finite cost")
	}
}
