package pipeline

import "math"

// Kind is the sort of a surface imperfection.
type Kind string

// The kinds.
const (
	Dig      Kind = "dig"
	Scratch  Kind = "scratch"
	EdgeChip Kind = "edge chip"
	Stain    Kind = "stain"
	Particle Kind = "particle"
	Fibre    Kind = "fibre"
	Dent     Kind = "dent"     // shallow: seen by its slopes alone
	Waviness Kind = "waviness" // several waves in a row, by their slopes
)

// Kinds lists the kinds in a fixed order.
func Kinds() []Kind { return append(ScatteringKinds(), Dent, Waviness) }

// ScatteringKinds lists the kinds that a dark field or a silhouette shows.
func ScatteringKinds() []Kind { return []Kind{Dig, Scratch, EdgeChip, Stain, Particle, Fibre} }

// Scatters reports whether the kind is told by light. The others are told by slope or by
// the outline, and no rule over what light shows renames them or joins them with what it
// does show: a chip that is bright too would be lost as a dig of the rim.
func (k Kind) Scatters() bool { return k != Dent && k != Waviness && k != EdgeChip }

// MaxDefects is how many defects one unit's evidence keeps; beyond it the evidence is
// truncated and cannot be accepted.
const MaxDefects = 2000

// Point is a place in pixels.
type Point struct {
	X float64 `json:"x"`
	Y float64 `json:"y"`
}

// Box is a half-open pixel rectangle.
type Box struct {
	X0 int `json:"x0"`
	Y0 int `json:"y0"`
	X1 int `json:"x1"`
	Y1 int `json:"y1"`
}

// Defect is one surface imperfection as one view, or a merge of views, found it.
type Defect struct {
	ID   int    `json:"id"` // from 1, within the list it stands in
	Kind Kind   `json:"kind"`
	View string `json:"view"` // the view whose measures are given
	Zone string `json:"zone"`
	Place
	EdgeDistanceUM float64 `json:"edge_distance_um"` // from the zone's own edge, inwards; 0 where it has none
	AreaPx         int     `json:"area_px"`          // pixels above the low threshold
	AreaUM2        float64 `json:"area_um2"`         // at half height
	LengthUM       float64 `json:"length_um"`        // along the long axis, at half height
	WidthUM        float64 `json:"width_um"`         // across it, at half height
	DiameterUM     float64 `json:"diameter_um"`      // of the circle with the half-height area
	LengthPx       float64 `json:"length_px"`
	WidthPx        float64 `json:"width_px"`
	DiameterPx     float64 `json:"diameter_px"`
	AngleDeg       float64 `json:"angle_deg"`  // long axis, from +x towards +y in pixels, −90 < a ≤ 90
	Flux           float64 `json:"flux"`       // DN·px above background, over the footprint
	PeakDN         float64 `json:"peak_dn"`    // highest value above background
	PeakSigma      float64 `json:"peak_sigma"` // highest value of the snr plane
	SNR            float64 `json:"snr"`        // flux over its own noise
	Dark           bool    `json:"dark"`       // darker than the background
	Saturated      bool    `json:"saturated"`  // touches a saturated pixel: not sized by flux
	Box            Box     `json:"box"`
	// DiameterFluxUM is the diameter by the calibration's sizing curve, of defects too small
	// for their outline to tell it; 0 = not sized by flux.
	DiameterFluxUM            float64  `json:"diameter_flux_um"`
	DiameterFluxUncertaintyUM float64  `json:"diameter_flux_uncertainty_um"` // standard, for one that scatters as the target's dots
	SlopeMrad                 float64  `json:"slope_mrad"`                   // steepest slope against the part's own form; 0 = not measured
	Path                      []Point  `json:"path"`                         // only for long defects: points along it
	SeenIn                    []string `json:"seen_in"`                      // after a merge: the views that saw it
	MergedFrom                []Ref    `json:"merged_from"`                  // after a merge: the defects it stands for
}

// Ref names a defect of one view.
type Ref struct {
	View string `json:"view"`
	ID   int    `json:"id"`
}

// Elongation is the length over the width; 0 where there is no width.
func (d Defect) Elongation() float64 {
	if d.WidthUM <= 0 {
		return 0
	}
	return d.LengthUM / d.WidthUM
}

// Coil is the length along the course over the diagonal of the box around the defect: at
// most about 1 for a straight one, more where it bends back or coils, as fibres do.
func (d Defect) Coil() float64 {
	diagonal := math.Hypot(float64(d.Box.X1-d.Box.X0), float64(d.Box.Y1-d.Box.Y0))
	if diagonal == 0 {
		return 0
	}
	return d.LengthPx / diagonal
}

// ReachUM is how far an edge chip reaches in from the edge; 0 for other kinds.
func (d Defect) ReachUM() float64 {
	if d.Kind != EdgeChip {
		return 0
	}
	return d.WidthUM
}
