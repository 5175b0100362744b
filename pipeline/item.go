package pipeline

import (
	"maps"
	"slices"

	"lapgate/pipeline/raster"
)

// Names of the planes that the built-in stages write. A stage may add others.
const (
	RawPlane        = "raw"        // DN as received
	CorrectedPlane  = "corrected"  // DN after flat-field
	BackgroundPlane = "background" // DN, the local level
	NoisePlane      = "noise"      // DN, the local sigma of one pixel
	SNRPlane        = "snr"        // matched filter output in units of its own sigma
	ContrastPlane   = "contrast"   // each good pixel above the level, of either sign, in units of its noise
)

// NamedPlane is a float32 picture that belongs to an Item. Its pixel (0, 0) lies at
// (OriginX, OriginY) of the frame and one of its pixels covers Step frame pixels.
type NamedPlane struct {
	Unit             string // "DN", "sigma", "mrad" …
	Pixels           *raster.Plane
	OriginX, OriginY float64
	Step             float64
}

// Measurement is a number that a stage took of a view.
type Measurement struct {
	Name  string  `json:"name"`
	Value float64 `json:"value"`
	Unit  string  `json:"unit"`
}

// MeasuredPartAngle is the measurement of a unit whose angle a datum gave, in degrees.
const MeasuredPartAngle = "part_angle_deg"

// Proof is one thing that a view must show before its defects count.
type Proof struct {
	Name   string  `json:"name"` // light, part, focus, live data, settings
	Value  float64 `json:"value"`
	Low    float64 `json:"low"`
	High   float64 `json:"high"`
	Unit   string  `json:"unit"`
	OK     bool    `json:"ok"`
	Reason string  `json:"reason"` // why not OK; becomes the hold reason
	// Beyond these it still holds but is on its way out; both 0 = no warnings.
	WarnLow  float64 `json:"warn_low,omitempty"`
	WarnHigh float64 `json:"warn_high,omitempty"`
	Warning  string  `json:"warning,omitempty"` // what to look at before it is a hold; empty = no warning
}

// State of a proof: steady, warning or hold.
func (p Proof) State() string {
	switch {
	case !p.OK:
		return "hold"
	case p.Warning != "":
		return "warning"
	}
	return "steady"
}

// Coverage says how much of the region was inspected well enough.
type Coverage struct {
	Share       float64 `json:"share"`        // 0 to 1
	Background  float64 `json:"background"`   // median level of the region, DN
	Noise       float64 `json:"noise"`        // median single-pixel noise of the region, DN
	SaturatedPx int     `json:"saturated_px"` // saturated pixels inside the region
	MaskedPx    int     `json:"masked_px"`    // pixels inside the region that were not inspected
}

// Item is one view on its way through the stages; with Scope ScopeUnit it is the
// whole unit and Views holds the finished views. Slices and planes are replaced, never
// changed in place, so an Item forks by shallow copy.
type Item struct {
	Identity     Identity
	View         string
	Frames       []Frame
	Calibration  *Calibration // nil where the recipe states "none"
	Geometry     Geometry
	Region       *Region
	Planes       map[string]NamedPlane
	BadMask      *raster.Mask // pixels replaced or not to be trusted; nil = none
	SaturatedAt  *raster.Mask // pixels at the top of their range; nil = none
	Measurements []Measurement
	Proofs       []Proof
	Defects      []Defect
	Coverage     Coverage
	Grid         *raster.Grid // level and noise by cells, where a stage measured them
	CoverageMap  *CoverageMap // nil = none was made
	Truncated    bool
	Views        []*Item // unit scope only
}

// Fork returns a copy that may be given other planes and defects without touching i.
func (i *Item) Fork() *Item {
	c := *i
	c.Planes = maps.Clone(i.Planes)
	return &c
}

// Raw returns the first frame's counts as a plane, unpacked once.
func (i *Item) Raw() (*raster.Plane, error) {
	if p, ok := i.Planes[RawPlane]; ok {
		return p.Pixels, nil
	}
	if len(i.Frames) == 0 {
		return nil, Invalid("view %q has no frame", i.View)
	}
	p, err := i.Frames[0].Raw.Plane()
	if err != nil {
		return nil, err
	}
	i.SetPlane(RawPlane, "DN", p)
	return p, nil
}

// Plane returns the pixels of the named plane, or an error that says which stage
// order is missing.
func (i *Item) Plane(name string) (*raster.Plane, error) {
	if name == RawPlane {
		return i.Raw()
	}
	p, ok := i.Planes[name]
	if !ok {
		return nil, Invalid("view %q has no %s plane; put the stage that writes it earlier in the recipe", i.View, name)
	}
	return p.Pixels, nil
}

// SetPlane stores a plane with the frame's own coordinates.
func (i *Item) SetPlane(name, unit string, p *raster.Plane) {
	if i.Planes == nil {
		i.Planes = map[string]NamedPlane{}
	}
	i.Planes[name] = NamedPlane{Unit: unit, Pixels: p, Step: 1}
}

// Measure appends a measurement.
func (i *Item) Measure(name string, value float64, unit string) {
	i.Measurements = append(slices.Clip(i.Measurements), Measurement{name, value, unit})
}

// Prove appends a proof.
func (i *Item) Prove(p Proof) { i.Proofs = append(slices.Clip(i.Proofs), p) }

// Number returns the value of a measurement by name.
func (i *Item) Number(name string) (float64, bool) {
	for _, m := range i.Measurements {
		if m.Name == name {
			return m.Value, true
		}
	}
	return 0, false
}
