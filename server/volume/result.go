package volume

import (
	"encoding/json"
	"math"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// Money is an amount in the plan's currency; JSON has null where it is
// unbounded because no good unit may ever ship.
type Money float64

// MarshalJSON writes null for what is not finite.
func (m Money) MarshalJSON() ([]byte, error) {
	if math.IsInf(float64(m), 0) || math.IsNaN(float64(m)) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(m))
}

// Basis says what every cost and crossover is counted per.
const Basis = "per good unit shipped"

// Result is an evaluated plan.
type Result struct {
	Name         string            `json:"name"`
	Currency     string            `json:"currency"`
	Basis        string            `json:"basis"`
	Draws        int               `json:"draws"`
	Seed         uint64            `json:"seed"`
	Level        float64           `json:"level"` // probability inside every low..high
	Combinations []Combination     `json:"combinations"`
	Quantities   []Quantity        `json:"quantities"`
	Ranges       []Range           `json:"ranges"`
	Crossovers   []Crossover       `json:"crossovers"`
	Yields       []YieldUsed       `json:"yields"`
	Information  []Information     `json:"information"`
	AllOrNone    []AllOrNone       `json:"all_or_none"`
	Threshold    *ThresholdResult  `json:"threshold,omitempty"`
	Assumptions  []plan.Assumption `json:"assumptions"`
	Cautions     []string          `json:"cautions"`
}

// Combination names a process under an inspection option.
type Combination struct {
	Process    string `json:"process"`
	Inspection string `json:"inspection"`
}

// String is process/inspection, as the command line takes it.
func (c Combination) String() string { return c.Process + "/" + c.Inspection }

// Quantity is one quantity of good units shipped with every combination, in
// the order of Result.Combinations.
type Quantity struct {
	Good  float64 `json:"good_units"`
	Asked bool    `json:"asked"` // an exact quantity, not a grid point
	Best  int     `json:"best"`  // index of the cheapest combination
	Cells []Cell  `json:"cells"`
}

// Cell is one combination at one quantity; costs are per good unit shipped.
type Cell struct {
	Cost               Money         `json:"cost"`
	Mean               Money         `json:"mean"` // over the draws
	Low                Money         `json:"low"`
	High               Money         `json:"high"`
	ChanceBest         float64       `json:"chance_best"` // share of draws where this is the cheapest
	Parts              cost.Parts    `json:"parts"`
	Starts             float64       `json:"starts"`
	Stations           cost.Stations `json:"stations"`
	EscapesPerMillion  float64       `json:"escapes_per_million"`
	OutsideUsual       bool          `json:"outside_usual_quantity"`
	ProfitPerGood      *float64      `json:"profit_per_good,omitempty"`
	NeverShipsInDraws  float64       `json:"never_ships_share,omitempty"`
	StandardErrorOfAvg Money         `json:"mean_standard_error"`
}

// Range is a run of quantities with one cheapest combination. Certain means
// that at every grid point inside it is the cheapest in at least the plan's
// level of the draws.
type Range struct {
	From     float64 `json:"from"`
	To       float64 `json:"to"`
	Best     int     `json:"best"`
	Certain  bool    `json:"certain"`
	RunnerUp int     `json:"runner_up"` // most often the cheapest of the others
}

// Crossover is a crossing of two combinations' costs per good unit shipped.
type Crossover struct {
	First      int  `json:"first"`
	Second     int  `json:"second"`
	WinnerTurn bool `json:"winner_turn"` // the cheapest combination of all changes here
	Crossing
	Cost         Money                 `json:"cost"`
	Distribution *CrossingDistribution `json:"distribution,omitempty"`
}

// CrossingDistribution is where a crossover lies over the draws, given that
// the two combinations cross at all: in each draw the crossing nearest the
// nominal one in ratio. Crossovers that do not open a turn of the cheapest
// combination are followed through fewer draws. Without any crossing all but
// Draws is 0.
type CrossingDistribution struct {
	Draws   int     `json:"draws"`
	Share   float64 `json:"share_with_crossing"`
	Low     float64 `json:"low"`
	Median  float64 `json:"median"`
	High    float64 `json:"high"`
	SD      float64 `json:"sd"`
	DeltaSD Money   `json:"delta_method_sd"` // first-order check of SD
}

// YieldUsed is the yield of one process as measured and as used.
type YieldUsed struct {
	Process     string       `json:"process"`
	Measured    float64      `json:"measured"`
	Used        float64      `json:"used"` // corrected for the gate where measured behind one
	Low         float64      `json:"low"`
	High        float64      `json:"high"`
	Counts      *plan.Counts `json:"counts,omitempty"`
	From        string       `json:"from"`
	ClippedDraw float64      `json:"clipped_share"` // draws where the correction left 0..1
}
