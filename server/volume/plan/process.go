package plan

// Process is one way of making the part. A start is a unit begun, good or not.
type Process struct {
	Name              string       `yaml:"name"`
	ToolingCost       float64      `yaml:"tooling_cost"`        // per set of tools
	ToolingLifeStarts float64      `yaml:"tooling_life_starts"` // starts per set; zero: never worn out
	RepairCost        float64      `yaml:"repair_cost"`         // per repair within a set's life
	RepairEveryStarts float64      `yaml:"repair_every_starts"` // zero: no repairs
	FirstArticleCost  float64      `yaml:"first_article_cost"`  // per set of tools
	SetupCost         float64      `yaml:"setup_cost"`          // per batch
	BatchSize         float64      `yaml:"batch_size"`          // starts per setup; zero: one setup
	BlockSize         float64      `yaml:"block_size"`          // starts made together; zero: starts are not rounded
	CostPerStart      []PriceBreak `yaml:"cost_per_start"`
	Learning          *Learning    `yaml:"learning"`
	Yield             Yield        `yaml:"yield"`
	LeadTimeDays      float64      `yaml:"lead_time_days"`
	UsualQuantity     Span         `yaml:"usual_quantity"`
	Sources           `yaml:",inline"`
}

// PriceBreak is the price of every start once at least FromStarts are bought.
type PriceBreak struct {
	FromStarts float64 `yaml:"from_starts"`
	Cost       float64 `yaml:"cost"`
}

// Learning makes part of the cost per start fall with the number of starts.
type Learning struct {
	Convention string  `yaml:"convention"` // crawford: the unit's cost falls; wright: the average's
	Rate       float64 `yaml:"rate"`       // left after each doubling, 0.8 for an 80 % curve
	Share      float64 `yaml:"share"`      // part of the cost per start that learns
	PricedAt   float64 `yaml:"priced_at"`  // the start at which the full cost holds; zero: the first
}

// Span is a range of quantities; zero at an end means open.
type Span struct {
	From float64 `yaml:"from"`
	To   float64 `yaml:"to"`
}

// Holds says whether a quantity lies inside.
func (s Span) Holds(quantity float64) bool {
	return quantity >= s.From && (s.To == 0 || quantity <= s.To)
}

// Yield is the share of starts that conform before any inspection: exactly
// one of a value, counts, a Beta, or a filter on the ledger.
type Yield struct {
	Value  *float64      `yaml:"value"`
	Count  *Count        `yaml:"count"` // conforming units of those started, truth known
	Beta   *Beta         `yaml:"beta"`
	Ledger *LedgerFilter `yaml:"ledger"`
	Counts *Counts       `yaml:"-"` // what the ledger answered; see ResolveLedger
}

// LedgerFilter names the inspections whose verdicts make a yield. Empty keys
// match all. Gate names the inspection option whose misses and false rejects
// stand between those verdicts and the truth.
type LedgerFilter struct {
	Part    string `yaml:"part"`
	Process string `yaml:"process"`
	Lot     string `yaml:"lot"`
	Line    string `yaml:"line"`
	Station string `yaml:"station"`
	Recipe  string `yaml:"recipe"`
	From    string `yaml:"from"` // RFC 3339, included
	To      string `yaml:"to"`   // RFC 3339, excluded
	Gate    string `yaml:"gate"`
}

// Counts are what the ledger holds of production: units shown and the verdicts
// on them, where a held unit that is shown again adds its next verdict.
type Counts struct {
	Started  int `json:"started"`
	Accepted int `json:"accepted"`
	Rejected int `json:"rejected"`
	Held     int `json:"held"`
}
