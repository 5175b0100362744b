package drift

import (
	"fmt"
	"math"

	"lapgate/pipeline"
)

// State is how far something has drifted.
type State string

// The states.
const (
	Steady  State = "steady"
	Warning State = "warning" // still good, but on its way out
	Held    State = "hold"
)

// Bounds are where a reading becomes a warning and where it becomes a hold, as shares of
// what was calibrated. All 0: it is not proven.
type Bounds struct {
	HoldBelow float64 `json:"hold_below" yaml:"hold_below"`
	WarnBelow float64 `json:"warn_below" yaml:"warn_below"`
	WarnAbove float64 `json:"warn_above" yaml:"warn_above"`
	HoldAbove float64 `json:"hold_above" yaml:"hold_above"`
}

// Off reports whether nothing is to be proven.
func (b Bounds) Off() bool { return b == Bounds{} }

// largest bounds every bound.
const largest = 1e6

// Check refuses bounds that are not in order; key is what they are called.
func (b Bounds) Check(key string) error {
	if !b.Off() && !(b.HoldBelow >= 0 && b.HoldBelow <= b.WarnBelow && b.WarnBelow < 1 && b.WarnAbove > 1 && b.WarnAbove <= b.HoldAbove && b.HoldAbove <= largest) {
		return fmt.Errorf("%s: got hold_below %g, warn_below %g, warn_above %g, hold_above %g, want them in this order with 1 between the warnings, or all 0", key, b.HoldBelow, b.WarnBelow, b.WarnAbove, b.HoldAbove)
	}
	return nil
}

// LightBounds warn at 5 % of light gained or lost and hold at 15 %; common practice, as
// the bounds below.
func LightBounds() Bounds { return Bounds{0.85, 0.95, 1.05, 1.15} }

// FocusBounds hold an edge half as wide again.
func FocusBounds() Bounds { return Bounds{0.5, 0.75, 1.25, 1.5} }

// ScaleBounds hold at 1 %.
func ScaleBounds() Bounds { return Bounds{0.99, 0.996, 1.004, 1.01} }

// PatternBounds hold when less than two fifths of the pattern are where they were. A dark
// current that doubled is warned of.
func PatternBounds() Bounds { return Bounds{0.4, 0.7, 2, 4} }

// Reading is one thing held against its calibration: 1 = as calibrated.
type Reading struct {
	Name        string
	Value       float64
	Uncertainty float64 // standard; 0 = not known
	Bounds      Bounds
	State       State
	What        string // what was read, in its own unit; may be empty
	Cause       string // what to look at when it is not steady
}

func reading(name string, value, uncertainty float64, b Bounds, low, high string) Reading {
	if math.IsNaN(value) || math.IsInf(value, 0) {
		value = 0
	}
	r := Reading{Name: name, Value: value, Uncertainty: uncertainty, Bounds: b, State: Steady}
	switch {
	case value < b.HoldBelow || value > b.HoldAbove:
		r.State = Held
	case value < b.WarnBelow || value > b.WarnAbove:
		r.State = Warning
	}
	if r.State != Steady {
		r.Cause = high
		if value < b.WarnBelow {
			r.Cause = low
		}
	}
	return r
}

// Worse returns the one of two readings that is further out.
func Worse(a, b Reading) Reading {
	rank := map[State]int{Steady: 0, Warning: 1, Held: 2}
	if rank[a.State] > rank[b.State] || rank[a.State] == rank[b.State] && math.Abs(a.Value-1) >= math.Abs(b.Value-1) {
		return a
	}
	return b
}

// Proof returns the reading as a proof: not OK when held.
func (r Reading) Proof() pipeline.Proof {
	p := pipeline.Proof{Name: r.Name, Value: r.Value, Low: r.Bounds.HoldBelow, High: r.Bounds.HoldAbove, Unit: "1", OK: r.State != Held,
		WarnLow: r.Bounds.WarnBelow, WarnHigh: r.Bounds.WarnAbove}
	switch r.State {
	case Held:
		p.Reason = r.sentence(p.Low, p.High)
	case Warning:
		p.Warning = r.sentence(p.WarnLow, p.WarnHigh)
	}
	return p
}

func (r Reading) sentence(low, high float64) string {
	what := ""
	if r.What != "" {
		what = " (" + r.What + ")"
	}
	return fmt.Sprintf("%s is %.4g of what was calibrated%s, want %.4g to %.4g: %s", r.Name, r.Value, what, low, high, r.Cause)
}

// Focus holds the 10–90 % width of the part's edge against that of the conforming part
// of the calibration. A width of 0 is one that could not be measured.
func Focus(edgeWidthPx float64, c *pipeline.Calibration, b Bounds) (Reading, error) {
	if c == nil || c.PartEdge == nil || !(c.PartEdge.WidthPx > 0) {
		return Reading{}, pipeline.Invalid("focus: the calibration knows no edge of a conforming part; calibrate with frames of one")
	}
	low := "the edge is sharper than at calibration: was that made out of focus?"
	if !(edgeWidthPx > 0) {
		low = "the edge has no width that can be measured"
	}
	r := reading(pipeline.ProofFocus, edgeWidthPx/c.PartEdge.WidthPx, 0, b, low, "the edge is blurred: check focus, lens and the part's height")
	r.What = fmt.Sprintf("an edge of %.2f px for %.2f", edgeWidthPx, c.PartEdge.WidthPx)
	return r, nil
}

// Scale holds the part's diameter in px against that of the conforming part of the
// calibration. relativeTolerance is how much parts may differ, as a standard deviation.
func Scale(diameterPx, relativeTolerance float64, c *pipeline.Calibration, b Bounds) (Reading, error) {
	if c == nil || c.PartEdge == nil || !(c.PartEdge.DiameterPx > 0) {
		return Reading{}, pipeline.Invalid("scale: the calibration knows no diameter of a conforming part; calibrate with frames of one")
	}
	v := diameterPx / c.PartEdge.DiameterPx
	r := reading(pipeline.ProofScale, v, v*math.Abs(relativeTolerance), b,
		"the part looks smaller: the camera moved away, the lens was turned, or the part is too small",
		"the part looks larger: the camera moved closer, the lens was turned, or the part is too large")
	r.What = fmt.Sprintf("a diameter of %.2f px for %.2f", diameterPx, c.PartEdge.DiameterPx)
	return r, nil
}
