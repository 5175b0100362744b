package plan

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// UnknownPoints is how many steps a search over an unknown takes.
const UnknownPoints = 2000

// Unknown is one figure of a plan that may be solved for.
type Unknown struct {
	Path     string
	Now      float64 // value at present; for counts and Betas the best figure
	From, To float64 // values that are allowed and searched
	isShare  bool
	plan     *Plan
	field    func(*Plan) field
}

// field is where an unknown lives: a share or an amount.
type field struct {
	amount *float64
	share  func(value float64)
}

// With is a copy of the plan with another value of the unknown. What was
// counted, measured or read becomes that value.
func (u *Unknown) With(value float64) *Plan {
	changed := u.plan.clone()
	if f := u.field(changed); f.share != nil {
		f.share(value)
	} else {
		*f.amount = value
	}
	return changed
}

// Point is the i-th of UnknownPoints+1 search points: even steps for a share,
// even ratios for an amount, which starts at zero.
func (u *Unknown) Point(i int) float64 {
	t := float64(i) / UnknownPoints
	if u.isShare {
		return u.From + t*(u.To-u.From)
	}
	if i == 0 {
		return u.From
	}
	low := math.Max(u.From, u.To*1e-15)
	return low * math.Pow(u.To/low, t)
}

func (p *Plan) clone() *Plan {
	c := *p
	c.Reworks = slices.Clone(p.Reworks)
	c.Processes = slices.Clone(p.Processes)
	c.Inspections = slices.Clone(p.Inspections)
	for i := range c.Processes {
		c.Processes[i].CostPerStart = slices.Clone(p.Processes[i].CostPerStart)
		if l := p.Processes[i].Learning; l != nil {
			copied := *l
			c.Processes[i].Learning = &copied
		}
	}
	return &c
}

// Unknown finds a figure by its path: outcomes.KEY, working_time.KEY,
// demand.KEY, processes.NAME.KEY, inspections.NAME.KEY or reworks.NAME.KEY.
func (p *Plan) Unknown(path string) (*Unknown, error) {
	known := p.unknowns()
	u, ok := known[path]
	if !ok {
		var keys []string
		prefix := path[:strings.LastIndex(path, ".")+1]
		for k := range known {
			if strings.HasPrefix(k, prefix) {
				keys = append(keys, k)
			}
		}
		slices.Sort(keys)
		return nil, fmt.Errorf("no unknown %q in the plan; allowed: %s", path, strings.Join(keys, ", "))
	}
	return u, nil
}

// unknowns are all figures that may be solved for, by path.
func (p *Plan) unknowns() map[string]*Unknown {
	all := unknownSet{p, map[string]*Unknown{}}
	all.amount("outcomes.scrap_value", func(p *Plan) *float64 { return &p.Outcomes.ScrapValue })
	all.amount("outcomes.escape_cost", func(p *Plan) *float64 { return &p.Outcomes.EscapeCost })
	all.amount("outcomes.return_cost", func(p *Plan) *float64 { return &p.Outcomes.Returns.Cost })
	all.amount("working_time.labour_cost_per_hour", func(p *Plan) *float64 { return &p.WorkingTime.LabourCostPerHour })
	for i, x := range p.Processes {
		all.process("processes."+x.Name+".", i)
	}
	for i, x := range p.Inspections {
		if x.Kind != None {
			all.inspection("inspections."+x.Name+".", i)
		}
	}
	for i, x := range p.Reworks {
		all.amount("reworks."+x.Name+".cost", func(p *Plan) *float64 { return &p.Reworks[i].Cost })
		all.share("reworks."+x.Name+".success", x.Success.Belief().Value(), 0, func(p *Plan, v float64) { p.Reworks[i].Success = Share{Value: &v} })
	}
	return all.known
}

type unknownSet struct {
	plan  *Plan
	known map[string]*Unknown
}

// amount is searched from 0 to a thousand million.
func (s unknownSet) amount(path string, at func(*Plan) *float64) {
	s.known[path] = &Unknown{Path: path, Now: *at(s.plan), To: 1e9, plan: s.plan,
		field: func(p *Plan) field { return field{amount: at(p)} }}
}

func (s unknownSet) share(path string, now, from float64, set func(*Plan, float64)) {
	s.known[path] = &Unknown{Path: path, Now: now, From: from, To: 1, isShare: true, plan: s.plan,
		field: func(p *Plan) field { return field{share: func(v float64) { set(p, v) }} }}
}

func (s unknownSet) process(at string, i int) {
	of := func(key string, field func(*Process) *float64) {
		s.amount(at+key, func(p *Plan) *float64 { return field(&p.Processes[i]) })
	}
	of("tooling_cost", func(x *Process) *float64 { return &x.ToolingCost })
	of("repair_cost", func(x *Process) *float64 { return &x.RepairCost })
	of("first_article_cost", func(x *Process) *float64 { return &x.FirstArticleCost })
	of("setup_cost", func(x *Process) *float64 { return &x.SetupCost })
	for j := range s.plan.Processes[i].CostPerStart {
		of(fmt.Sprintf("cost_per_start[%d]", j), func(x *Process) *float64 { return &x.CostPerStart[j].Cost })
	}
	s.known[at+"cost_per_start"] = s.known[at+"cost_per_start[0]"]
	y := s.plan.Processes[i].Yield
	now := Share{y.Value, y.Count, y.Beta}.Belief().Value()
	if k, err := Know(s.plan); err == nil {
		now = k.World(k.Values()).Yield[i]
	}
	s.share(at+"yield", now, 1e-4, func(p *Plan, v float64) { p.Processes[i].Yield = Yield{Value: &v} })
	if l := s.plan.Processes[i].Learning; l != nil {
		s.share(at+"learning_rate", l.Rate, 0.5, func(p *Plan, v float64) { p.Processes[i].Learning.Rate = v })
	}
}

func (s unknownSet) inspection(at string, i int) {
	of := func(key string, field func(*Inspection) *float64) {
		s.amount(at+key, func(p *Plan) *float64 { return field(&p.Inspections[i]) })
	}
	of("price", func(x *Inspection) *float64 { return &x.Station.Price })
	of("cycle_time_s", func(x *Inspection) *float64 { return &x.Station.CycleTimeS })
	of("crew", func(x *Inspection) *float64 { return &x.Station.Crew })
	of("running_cost_per_hour", func(x *Inspection) *float64 { return &x.Station.RunningCostPerHour })
	of("cost_per_look", func(x *Inspection) *float64 { return &x.Station.CostPerLook })
	x := s.plan.Inspections[i]
	s.share(at+"hold_share", x.Hold.Share, 0, func(p *Plan, v float64) { p.Inspections[i].Hold.Share = v })
	if x.Study == nil && x.SameErrorsAs == "" {
		s.share(at+"miss", x.Miss.Belief().Value(), 0, func(p *Plan, v float64) { p.Inspections[i].Miss = Share{Value: &v} })
		s.share(at+"false_reject", x.FalseReject.Belief().Value(), 0, func(p *Plan, v float64) { p.Inspections[i].FalseReject = Share{Value: &v} })
	}
}
