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

// NameScale is the name of the scale's reading. The others are named as their proofs:
// pipeline.ProofLight, ProofFocus and ProofPattern.
const NameScale = "scale"

// Bounds are where a reading becomes a warning and where it becomes a hold.
type Bounds struct{ HoldLow, WarnLow, WarnHigh, HoldHigh float64 }

// Check refuses bounds that are not in order.
func (b Bounds) Check() error {
	if !(b.HoldLow <= b.WarnLow && b.WarnLow < b.WarnHigh && b.WarnHigh <= b.HoldHigh) {
		return pipeline.Invalid("bounds: got hold below %g, warning below %g and above %g, hold above %g, want them in this order", b.HoldLow, b.WarnLow, b.WarnHigh, b.HoldHigh)
	}
	return nil
}

// LightBounds warn at 5 % of light gained or lost and hold at 15 %; common practice, as
// the bounds below. All readings are shares of what was calibrated.
func LightBounds() Bounds { return Bounds{0.85, 0.95, 1.05, 1.15} }

// FocusBounds hold an edge half as wide again.
func FocusBounds() Bounds { return Bounds{0.5, 0.75, 1.25, 1.5} }

// ScaleBounds hold at 1 %.
func ScaleBounds() Bounds { return Bounds{0.99, 0.996, 1.004, 1.01} }

// PatternBounds hold when less than half of the pattern is where it was.
func PatternBounds() Bounds { return Bounds{0.5, 0.75, 2, 4} }

// Reading is one thing held against its calibration: 1 = as calibrated.
type Reading struct {
	Name        string
	Value       float64
	Uncertainty float64 // standard; 0 = not known
	Bounds      Bounds
	State       State
	Cause       string // what to look at when it is not steady
}

func reading(name string, value, uncertainty float64, b Bounds, low, high string) Reading {
	r := Reading{Name: name, Value: value, Uncertainty: uncertainty, Bounds: b, State: Steady}
	switch {
	case !(value >= b.HoldLow && value <= b.HoldHigh): // also what is no number
		r.State = Held
	case value < b.WarnLow || value > b.WarnHigh:
		r.State = Warning
	}
	if r.State != Steady {
		r.Cause = high
		if value < b.WarnLow {
			r.Cause = low
		}
	}
	return r
}

// Proof returns the reading as a proof: not OK when held.
func (r Reading) Proof() pipeline.Proof {
	p := pipeline.Proof{Name: r.Name, Value: r.Value, Low: r.Bounds.HoldLow, High: r.Bounds.HoldHigh, Unit: "1", OK: r.State != Held}
	if !p.OK {
		p.Reason = fmt.Sprintf("%s is %.3f of the calibrated value, want %.3f to %.3f: %s", r.Name, r.Value, p.Low, p.High, r.Cause)
	}
	return p
}

// Apply adds the reading to an item: a proof, the measurement "<name>", and, when it is a
// warning, the measurement "<name> warning" with the bound that was passed.
func (r Reading) Apply(item *pipeline.Item) {
	item.Prove(r.Proof())
	item.Measure(r.Name, r.Value, "1")
	if r.State == Warning {
		bound := r.Bounds.WarnHigh
		if r.Value < r.Bounds.WarnLow {
			bound = r.Bounds.WarnLow
		}
		item.Measure(r.Name+" warning", bound, "1")
	}
}

// Focus holds the 10–90 % width of the part's edge against that of the conforming part
// of the calibration.
func Focus(edgeWidthPx float64, c *pipeline.Calibration, b Bounds) (Reading, error) {
	if c.PartEdge == nil || !(c.PartEdge.WidthPx > 0) {
		return Reading{}, pipeline.Invalid("focus: the calibration has no edge width; calibrate with frames of a conforming part")
	}
	return reading(pipeline.ProofFocus, edgeWidthPx/c.PartEdge.WidthPx, 0, b,
		"the edge is sharper than at calibration: was that made out of focus?", "the edge is blurred: check focus, lens and the part's height"), nil
}

// Scale holds the part's diameter in px against that of the conforming part of the
// calibration. relativeTolerance is how much parts may differ, as a standard deviation.
func Scale(diameterPx, relativeTolerance float64, c *pipeline.Calibration, b Bounds) (Reading, error) {
	if c.PartEdge == nil || !(c.PartEdge.DiameterPx > 0) {
		return Reading{}, pipeline.Invalid("scale: the calibration has no part diameter; calibrate with frames of a conforming part")
	}
	v := diameterPx / c.PartEdge.DiameterPx
	return reading(NameScale, v, v*math.Abs(relativeTolerance), b,
		"the part looks smaller: the camera moved away, the lens was turned, or the part is too small",
		"the part looks larger: the camera moved closer, the lens was turned, or the part is too large"), nil
}
