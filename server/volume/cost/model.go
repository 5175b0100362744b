package cost

import (
	"fmt"

	"lapgate/server/volume/learning"
	"lapgate/server/volume/plan"
	"lapgate/server/volume/sampling"
)

// Model is a plan made ready for many evaluations. It does not change.
type Model struct {
	plan   *plan.Plan
	makers []maker
	gates  []gate
	routes []route
	escape float64 // money per escape
	// loads keeps the tables of loadsForWait by limit: they are slow to make.
	loads map[float64][]float64
}

type route struct {
	cost float64
	then int // next route, or -1 for scrap
}

// NewModel prepares a validated plan.
func NewModel(p *plan.Plan) (*Model, error) { return (&Model{}).With(p) }

// With prepares another plan, much like this model's, and reuses what was slow
// to make. The model itself does not change.
func (m *Model) With(p *plan.Plan) (*Model, error) {
	known, o := m.loads, p.Outcomes
	m = &Model{plan: p, escape: o.EscapeCost + o.Returns.ShareOfEscapes*o.Returns.Cost, loads: map[float64][]float64{}}
	for i := range p.Processes {
		mk, err := newMaker(&p.Processes[i])
		if err != nil {
			return nil, fmt.Errorf("process %q: %w", p.Processes[i].Name, err)
		}
		m.makers = append(m.makers, mk)
	}
	for i := range p.Inspections {
		g := newGate(p, &p.Inspections[i])
		m.tabulate(&g, known)
		m.gates = append(m.gates, g)
	}
	for i := range p.Reworks {
		m.routes = append(m.routes, route{p.Reworks[i].Cost, p.ReworkIndex(p.Reworks[i].Then)})
	}
	return m, nil
}

// tabulate gives a gate with a longest wait its table of loads.
func (m *Model) tabulate(g *gate, known map[float64][]float64) {
	if g.option.Station.MaxWaitS <= 0 || g.hours <= 0 {
		return
	}
	limit := g.option.Station.MaxWaitS / 3600 / g.hours // in service times
	for _, tables := range []map[float64][]float64{m.loads, known} {
		if table, ok := tables[limit]; ok {
			g.loads = table
		}
	}
	if g.loads == nil {
		g.loads = loadsForWait(limit)
	}
	m.loads[limit] = g.loads
}

func newMaker(x *plan.Process) (maker, error) {
	m := maker{process: x}
	if err := m.learn(x.Learning); err != nil {
		return m, err
	}
	for _, b := range x.CostPerStart {
		m.atBreak = append(m.atBreak, b.Cost*m.learned(b.FromStarts))
	}
	return m, nil
}

// learn normalises the learning curve so that the stated price holds at the
// start it was given for.
func (m *maker) learn(l *plan.Learning) error {
	if l == nil {
		return nil
	}
	curve, err := learning.New(learning.Convention(l.Convention), l.Rate)
	if err != nil {
		return err
	}
	m.curve, m.share, m.scale = &curve, l.Share, 1
	if l.PricedAt > 1 {
		m.scale = 1 / curve.Unit(l.PricedAt)
	}
	return nil
}

func newGate(p *plan.Plan, x *plan.Inspection) gate {
	g := gate{option: x, route: p.ReworkIndex(x.Rework), uptime: 1}
	if x.Station.Uptime > 0 {
		g.uptime = x.Station.Uptime
	}
	if x.SameResultShare != nil {
		g.same = *x.SameResultShare
	}
	s, w := x.Station, p.WorkingTime
	g.hours = s.CycleTimeS / 3600 / g.uptime
	g.perLook = s.CostPerLook + g.hours*(s.Crew*w.LabourCostPerHour+s.RunningCostPerHour)
	if s.Charge != plan.Dedicated && s.LifeYears > 0 {
		g.perLook += g.hours * s.Price / (s.LifeYears * w.PeriodsPerYear * w.HoursPerPeriod)
	}
	g.perHold = x.Hold.Cost + x.Hold.Minutes/60*w.LabourCostPerHour
	return g
}

// gate is one inspection option made ready. Money is per look or per hold.
type gate struct {
	option           *plan.Inspection
	route            int
	same, uptime     float64
	hours            float64 // station hours per look
	perLook, perHold float64
	loads            []float64 // see loadsForWait; empty where no wait is asked for
}

// lotPlan is the sampling plan for a lot of the given units.
func (g *gate) lotPlan(lot int) sampling.SinglePlan {
	s, err := sampling.NormalPlan(lot, g.option.ISO2859.Level, g.option.ISO2859.AQLPercent)
	if err != nil {
		// Level, AQL and lot size were checked with the plan.
		panic(err)
	}
	return s
}
