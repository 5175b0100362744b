package plan

import (
	"fmt"
	"math"
	"regexp"
)

// maxCells bounds the costs worked out for one plan: some minutes of work.
const maxCells = 1_000_000_000

// maxCombinations bounds processes times inspection options.
const maxCombinations = 400

// Validate checks everything that can be said without other files. The error
// joins Problems.
func (p *Plan) Validate() error {
	var c checks
	c.want(p.Format == Format, "format", "found %d; allowed: %d", p.Format, Format)
	c.want(regexp.MustCompile(`^[A-Z]{3}$`).MatchString(p.Currency), "currency",
		"found %q; allowed: three capital letters such as EUR", p.Currency)
	p.checkTime(&c)
	p.checkQuantities(&c)
	p.checkOutcomes(&c)
	p.checkNames(&c)
	p.checkReworks(&c)
	for i := range p.Processes {
		p.checkProcess(&c, fmt.Sprintf("processes[%d]", i), &p.Processes[i])
	}
	for i := range p.Inspections {
		p.checkInspection(&c, fmt.Sprintf("inspections[%d]", i), &p.Inspections[i])
	}
	p.checkThreshold(&c)
	return c.err()
}

func (p *Plan) checkTime(c *checks) {
	c.positive("working_time.hours_per_period", p.WorkingTime.HoursPerPeriod)
	c.positive("working_time.periods_per_year", p.WorkingTime.PeriodsPerYear)
	c.notNegative("working_time.labour_cost_per_hour", p.WorkingTime.LabourCostPerHour)
	c.notNegative("demand.units_per_period", p.Demand.UnitsPerPeriod)
}

func (p *Plan) checkQuantities(c *checks) {
	q := p.Quantities
	c.want(q.From >= 1, "quantities.from", "found %v; allowed: 1 or more good units", q.From)
	c.want(q.To >= q.From && q.To <= 1e9, "quantities.to", "found %v; allowed: %v to 1e9", q.To, q.From)
	c.want(q.Points >= 2 && q.Points <= 1000, "quantities.points", "found %d; allowed: 2 to 1000", q.Points)
	for i, exact := range q.Exact {
		c.want(exact >= 1 && exact <= 1e9, fmt.Sprintf("quantities.exact[%d]", i), "found %v; allowed: 1 to 1e9", exact)
	}
	u := p.Uncertainty
	c.want(u.Draws >= 100 && u.Draws <= 1_000_000, "uncertainty.draws", "found %d; allowed: 100 to 1000000", u.Draws)
	cells := float64(len(p.Processes)*len(p.Inspections)) * float64(q.Points+len(q.Exact)) * float64(u.Draws)
	c.want(cells <= maxCells, "uncertainty.draws", "combinations x quantities x draws come to %.3g; allowed: %.0e", cells, float64(maxCells))
	c.want(u.Level > 0 && u.Level < 1, "uncertainty.level", "found %v; allowed: between 0 and 1, such as 0.90", u.Level)
}

func (p *Plan) checkOutcomes(c *checks) {
	o := p.Outcomes
	c.notNegative("outcomes.price", o.Price)
	c.notNegative("outcomes.scrap_value", o.ScrapValue)
	c.notNegative("outcomes.escape_cost", o.EscapeCost)
	c.share("outcomes.returns.share_of_escapes", o.Returns.ShareOfEscapes)
	c.notNegative("outcomes.returns.cost", o.Returns.Cost)
}

func (p *Plan) checkNames(c *checks) {
	c.want(len(p.Processes) > 0, "processes", "is empty; at least one process is needed")
	c.want(len(p.Inspections) > 0, "inspections", "is empty; at least one option is needed")
	n := len(p.Processes) * len(p.Inspections)
	c.want(n <= maxCombinations, "processes", "%d combinations of process and inspection; allowed: %d", n, maxCombinations)
	var processes, inspections, reworks []string
	for _, x := range p.Processes {
		processes = append(processes, x.Name)
	}
	for _, x := range p.Inspections {
		inspections = append(inspections, x.Name)
	}
	for _, x := range p.Reworks {
		reworks = append(reworks, x.Name)
	}
	c.names("processes", processes)
	c.names("inspections", inspections)
	c.names("reworks", reworks)
}

func (c *checks) names(list string, names []string) {
	seen := map[string]bool{"": true, Scrap: list == "reworks"}
	allowed := regexp.MustCompile(`^[A-Za-z0-9_-]{1,64}$`)
	for i, name := range names {
		path := fmt.Sprintf("%s[%d].name", list, i)
		if c.want(allowed.MatchString(name), path, "found %q; allowed: 1 to 64 of A-Z a-z 0-9 _ -", name) {
			c.want(!seen[name], path, "%q is taken; every name in %s must differ", name, list)
		}
		seen[name] = true
	}
}

func (p *Plan) checkReworks(c *checks) {
	for i, r := range p.Reworks {
		at := fmt.Sprintf("reworks[%d]", i)
		c.notNegative(at+".cost", r.Cost)
		c.knowledge(at+".success", r.Success)
		if p.checkRoute(c, at+".then", r.Then) {
			c.want(!p.cyclic(r.Name), at+".then", "the route %q comes back to itself; every route must end in %s", r.Name, Scrap)
		}
	}
}

// checkRoute accepts a route's name, "scrap", or nothing.
func (p *Plan) checkRoute(c *checks, path, name string) bool {
	return c.want(name == "" || name == Scrap || p.ReworkIndex(name) >= 0, path,
		"found %q; allowed: %s or the name of a route under reworks", name, Scrap)
}

func (p *Plan) cyclic(start string) bool {
	name := start
	for range p.Reworks {
		i := p.ReworkIndex(name)
		if i < 0 {
			return false
		}
		if name = p.Reworks[i].Then; name == start {
			return true
		}
	}
	return false
}

// knowledge wants exactly one way of saying a share.
func (c *checks) knowledge(path string, s Share) {
	said := 0
	if s.Value != nil {
		said++
		c.share(path+".value", *s.Value)
	}
	if s.Count != nil {
		said++
		c.count(path+".count", *s.Count)
	}
	if s.Beta != nil {
		said++
		c.beta(path+".beta", *s.Beta)
	}
	c.want(said == 1, path, "says %d of value, count and beta; exactly one is needed", said)
}

func (p *Plan) checkThreshold(c *checks) {
	t := p.Threshold
	if t == nil {
		return
	}
	c.want(t.File != "", "threshold.file", "is empty; name a CSV file")
	c.want(p.ProcessIndex(t.Process) >= 0, "threshold.process", "no process %q", t.Process)
	i := p.InspectionIndex(t.Inspection)
	if c.want(i >= 0, "threshold.inspection", "no inspection %q", t.Inspection) {
		c.want(p.Inspections[i].Kind != None, "threshold.inspection", "%q inspects nothing and has no setting", t.Inspection)
	}
	c.want(t.Quantity >= 1, "threshold.quantity", "found %v; allowed: 1 or more good units", t.Quantity)
	c.want(!math.IsNaN(t.DrawingLimit), "threshold.drawing_limit", "is not a number")
}
