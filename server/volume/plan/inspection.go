package plan

// Kind is a depth of inspection.
type Kind string

// The depths of inspection.
const (
	None          Kind = "none"
	ISO2859       Kind = "iso_2859_1"     // lots, single sampling, normal inspection
	CSP           Kind = "csp_1"          // continuous sampling
	Full          Kind = "full"           // every unit once
	TwiceMajority Kind = "twice_majority" // every unit twice, a third look decides
	TwiceEither   Kind = "twice_either"   // every unit twice, either look rejects
)

// Kinds are all depths, for messages and documents.
func Kinds() []Kind { return []Kind{None, ISO2859, CSP, Full, TwiceMajority, TwiceEither} }

// Inspection is one way of inspecting. Where the kind is none all else but
// the name is left out.
type Inspection struct {
	Name            string    `yaml:"name"`
	Kind            Kind      `yaml:"kind"`
	ISO2859         *Lots     `yaml:"iso_2859_1"`
	CSP1            *Stream   `yaml:"csp_1"`
	FalseReject     Share     `yaml:"false_reject"`   // good units rejected in one look
	Miss            Share     `yaml:"miss"`           // bad units accepted in one look
	Study           *StudyRef `yaml:"study"`          // instead of the two shares
	SameErrorsAs    string    `yaml:"same_errors_as"` // another option with the same camera and settings: its two shares, and its luck
	SameResultShare *float64  `yaml:"same_result_share"`
	Station         Station   `yaml:"station"`
	Hold            Hold      `yaml:"hold"`
	Rework          string    `yaml:"rework"` // where rejected units go; empty: scrap
	Sources         `yaml:",inline"`
}

// Lots is lot by lot sampling by ISO 2859-1, single, normal. A quantity below
// LotSize makes one lot of that quantity.
type Lots struct {
	Level        string  `yaml:"level"`         // S-1 S-2 S-3 S-4 I II III
	AQLPercent   float64 `yaml:"aql_percent"`   // percent nonconforming
	LotSize      int     `yaml:"lot_size"`      // units
	RejectedLots string  `yaml:"rejected_lots"` // screen: every unit is then inspected; scrap
}

// What becomes of a rejected lot.
const (
	ScreenLot = "screen"
	ScrapLot  = "scrap"
)

// Stream is Dodge's CSP-1.
type Stream struct {
	Clearance int     `yaml:"clearance"` // i: conforming units in a row that end 100 % inspection
	Fraction  float64 `yaml:"fraction"`  // f: share inspected after that
}

// Station is what an inspection place costs and how fast it is.
type Station struct {
	Price              float64 `yaml:"price"`
	LifeYears          float64 `yaml:"life_years"`
	CycleTimeS         float64 `yaml:"cycle_time_s"` // per look
	Crew               float64 `yaml:"crew"`         // persons per station
	Uptime             float64 `yaml:"uptime"`       // share of the working time; zero: 1
	RunningCostPerHour float64 `yaml:"running_cost_per_hour"`
	CostPerLook        float64 `yaml:"cost_per_look"` // consumables
	Charge             Charge  `yaml:"charge"`        // empty: by_use
	MaxWaitS           float64 `yaml:"max_wait_s"`    // mean wait before the station; zero: none asked
}

// Charge says how the price of stations reaches the unit.
type Charge string

// The charges.
const (
	ByUse     Charge = "by_use"    // for the hours used, over the station's life
	Dedicated Charge = "dedicated" // whole stations, bought for this plan
)

// Hold is how often an inspected unit is put aside for a person, who then
// judges it with the same misses and false rejects.
type Hold struct {
	Share   float64 `yaml:"share"`   // of inspected units
	Cost    float64 `yaml:"cost"`    // per hold, besides the person's time
	Minutes float64 `yaml:"minutes"` // of one person
}

// Threshold asks for the least-cost setting of one inspection option. The
// table's rows come from re-judging units whose truth is known.
type Threshold struct {
	File         string         `yaml:"file"` // CSV beside the plan
	Process      string         `yaml:"process"`
	Inspection   string         `yaml:"inspection"`
	Quantity     float64        `yaml:"quantity"`
	DrawingLimit float64        `yaml:"drawing_limit"` // in the unit of the settings; stays binding
	Unit         string         `yaml:"unit"`          // of the settings
	Rows         []ThresholdRow `yaml:"-"`
}

// ThresholdRow is one setting with what it did to units of known truth.
type ThresholdRow struct {
	Setting       float64 `json:"setting"`
	Misses        int     `json:"misses"`        // of Nonconforming
	Nonconforming int     `json:"nonconforming"` // units
	FalseRejects  int     `json:"false_rejects"` // of Conforming
	Conforming    int     `json:"conforming"`    // units
}
