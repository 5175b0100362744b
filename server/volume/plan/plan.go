package plan

// Format is the version of plan and study files this package reads.
const Format = 1

// Plan is the plan file: ways of making a part, ways of inspecting it, and
// what follows from each verdict. Money is in Currency throughout.
type Plan struct {
	Format      int          `yaml:"format"`
	Name        string       `yaml:"name"`
	Note        string       `yaml:"note"`
	Currency    string       `yaml:"currency"` // three capital letters, ISO 4217
	WorkingTime WorkingTime  `yaml:"working_time"`
	Demand      Demand       `yaml:"demand"`
	Quantities  Quantities   `yaml:"quantities"`
	Uncertainty Uncertainty  `yaml:"uncertainty"`
	Outcomes    Outcomes     `yaml:"outcomes"`
	Reworks     []Rework     `yaml:"reworks"`
	Processes   []Process    `yaml:"processes"`
	Inspections []Inspection `yaml:"inspections"`
	Threshold   *Threshold   `yaml:"threshold"`
}

// WorkingTime is the time in which stations can work.
type WorkingTime struct {
	HoursPerPeriod    float64 `yaml:"hours_per_period"`
	PeriodsPerYear    float64 `yaml:"periods_per_year"`
	LabourCostPerHour float64 `yaml:"labour_cost_per_hour"` // per person
	Sources           `yaml:",inline"`
}

// Demand is the pace. A quantity above UnitsPerPeriod takes several periods;
// zero means that any quantity is wanted within one period.
type Demand struct {
	UnitsPerPeriod float64 `yaml:"units_per_period"`
	Sources        `yaml:",inline"`
}

// Quantities are the good units shipped to evaluate: a log grid with Points
// from From to To, and exact ones.
type Quantities struct {
	From   float64   `yaml:"from"`
	To     float64   `yaml:"to"`
	Points int       `yaml:"points"`
	Exact  []float64 `yaml:"exact"`
}

// Uncertainty sets the seeded Monte Carlo. Level is the probability inside
// the intervals (0.90: from the 5 % to the 95 % point). Prior counts of the
// posterior Betas are one half each (Jeffreys).
type Uncertainty struct {
	Draws int     `yaml:"draws"`
	Seed  uint64  `yaml:"seed"`
	Level float64 `yaml:"level"`
}

// Outcomes is what a unit is worth, or costs, after its verdict.
type Outcomes struct {
	Price      float64 `yaml:"price"`       // per good unit shipped; zero: not stated
	ScrapValue float64 `yaml:"scrap_value"` // got for each unit thrown away
	EscapeCost float64 `yaml:"escape_cost"` // each nonconforming unit shipped
	Returns    Returns `yaml:"returns"`
	Sources    `yaml:",inline"`
}

// Returns is the share of escapes that come back and what each then costs on
// top of the escape.
type Returns struct {
	ShareOfEscapes float64 `yaml:"share_of_escapes"`
	Cost           float64 `yaml:"cost"`
}

// Rework is a route for rejected units: reworked, then inspected each one
// again; units rejected again go to Then, a route's name or "scrap".
type Rework struct {
	Name    string  `yaml:"name"`
	Cost    float64 `yaml:"cost"`    // per unit reworked
	Success Share   `yaml:"success"` // chance that a bad unit becomes good
	Then    string  `yaml:"then"`    // empty: scrap
	Sources `yaml:",inline"`
}

// Scrap is the end of every rework route.
const Scrap = "scrap"

// Sources says where the figures of one item came from: one text for all, and
// texts by key where they differ.
type Sources struct {
	Source string            `yaml:"source"`
	ByKey  map[string]string `yaml:"sources"`
}

// Of is the source of one key; empty where none is stated.
func (s Sources) Of(key string) string {
	if text, ok := s.ByKey[key]; ok {
		return text
	}
	return s.Source
}

// ProcessIndex finds a process by name, or -1.
func (p *Plan) ProcessIndex(name string) int {
	for i := range p.Processes {
		if p.Processes[i].Name == name {
			return i
		}
	}
	return -1
}

// InspectionIndex finds an inspection option by name, or -1.
func (p *Plan) InspectionIndex(name string) int {
	for i := range p.Inspections {
		if p.Inspections[i].Name == name {
			return i
		}
	}
	return -1
}

// ReworkIndex finds a rework route by name, or -1; "" and "scrap" are -1.
func (p *Plan) ReworkIndex(name string) int {
	for i := range p.Reworks {
		if p.Reworks[i].Name == name {
			return i
		}
	}
	return -1
}
