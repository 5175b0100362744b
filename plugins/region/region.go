package region

import (
	"context"
	"fmt"
	"math"
	"sync"

	"lapgate/pipeline"
	"lapgate/pipeline/drift"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = withMaskHash(pipeline.Make(pipeline.Factory{
	Type: "region", Version: "2", Scope: pipeline.ScopeView,
	Summary: "Finds the part on the frame as received and lays the drawing's zones over it.",
	Reads:   []string{pipeline.RawPlane}, Writes: []string{"region", "geometry"},
}, Default, build))

// withMaskHash puts the hash of the mask that was read into the effective settings.
func withMaskHash(f pipeline.Factory) pipeline.Factory {
	inner := f.New
	f.New = func(decode pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
		s, settings, err := inner(decode, env)
		if st, ok := s.(*stage); ok && err == nil {
			settings = st.s
		}
		return s, settings, err
	}
	return f
}

type stage struct {
	s        Settings
	geometry pipeline.Geometry
	mask     *raster.Mask // for MaskImage
	// calibration is there only where it knows the edge of a conforming part.
	calibration *pipeline.Calibration

	mu   sync.Mutex // guards last
	last place      // of a shape that lies in the same place of every frame
}

func build(s Settings, env pipeline.Environment) (pipeline.Stage, error) {
	st := &stage{s: s, geometry: env.Geometry}
	if st.geometry == nil {
		return nil, pipeline.Invalid("region: the view has no scale; give um_per_px")
	}
	if s.Shape == FoundCircle && env.Calibration != nil && env.Calibration.PartEdge != nil {
		st.calibration = env.Calibration
	}
	if s.NeedPartEdge && st.calibration == nil {
		return nil, pipeline.Invalid("need_part_edge: the calibration knows no edge of a conforming part; calibrate with one (--part)")
	}
	if s.Shape == MaskImage {
		mask, sum, err := readMask(s.MaskFile, env.ReadFile)
		if err != nil {
			return nil, err
		}
		if s.MaskSHA256 != "" && s.MaskSHA256 != sum {
			return nil, pipeline.Invalid("mask_sha256: got %s, but %s has %s", s.MaskSHA256, s.MaskFile, sum)
		}
		st.mask, st.s.MaskSHA256 = mask, sum
	}
	return st, nil
}

// Run implements pipeline.Stage.
func (st *stage) Run(ctx context.Context, item *pipeline.Item) error {
	if st.s.Shape == FoundCircle || st.s.Shape == FoundArea {
		raw, err := item.Raw()
		if err != nil {
			return err
		}
		if st.s.Shape == FoundArea {
			st.findArea(item, raw)
		} else {
			st.find(item, raw)
		}
		return ctx.Err()
	}
	p, err := st.fixed(item)
	if err != nil {
		return err
	}
	item.Region, item.Geometry = p.region, p.geometry
	return ctx.Err()
}

// directions is over how many directions a radius is averaged: a lens that distorts shows
// a circle off its middle as an oval.
const directions = 16

// radiusPx returns the radius in px of a circle of a diameter in mm about (x, y).
func (st *stage) radiusPx(x, y, diameterMM float64) float64 {
	g, sum := st.geometry.WithOrigin(x, y), 0.
	for k := range directions {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / directions)
		px, py := g.ToPixel(500*diameterMM*cos, 500*diameterMM*sin)
		sum += math.Hypot(px-x, py-y)
	}
	return math.Round(1e9*sum/directions) / 1e9 // so that a whole radius is whole
}

// diameterMM is the inverse of radiusPx.
func (st *stage) diameterMM(c raster.Circle) float64 {
	g, sum := st.geometry.WithOrigin(c.X, c.Y), 0.
	for k := range directions {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / directions)
		u, v, _ := g.ToStation(c.X+c.R*cos, c.Y+c.R*sin)
		sum += math.Hypot(u, v)
	}
	return sum / directions / 500
}

func (st *stage) centre(width, height int) (x, y float64) {
	if st.s.CentreXPx == 0 && st.s.CentreYPx == 0 {
		return float64(width-1) / 2, float64(height-1) / 2
	}
	return st.s.CentreXPx, st.s.CentreYPx
}

// find looks for the part and proves that it is there; without it the region is empty.
func (st *stage) find(item *pipeline.Item, raw *raster.Plane) {
	s := st.s
	search := raster.CircleSearch{DarkInside: s.Polarity == "dark", Ridge: s.Polarity == "rim", MaxRMS: s.MaxEdgeRMSPx, Reach: s.SearchPx}
	search.X, search.Y = st.centre(raw.Width, raw.Height)
	if search.Reach == 0 {
		search.Reach = float64(min(raw.Width, raw.Height)) / 4
	}
	// The search is wider than the tolerance, so that a part of the wrong size is measured.
	search.RMin = max(st.radiusPx(search.X, search.Y, s.DiameterMM-2*s.DiameterToleranceMM), 2)
	search.RMax = max(st.radiusPx(search.X, search.Y, s.DiameterMM+2*s.DiameterToleranceMM), search.RMin+1)
	fit, err := raster.FindCircle(raw, search)
	proof := pipeline.Proof{Name: "part", Unit: "mm", Low: s.DiameterMM - s.DiameterToleranceMM, High: s.DiameterMM + s.DiameterToleranceMM}
	if err != nil {
		proof.Reason = "part not found: " + err.Error()
		st.otherSize(&proof, raw, search)
		item.Prove(proof)
		st.leaveEmpty(item, raw)
		return
	}
	st.prove(item, proof, fit)
	st.measure(item, fit)
	p := st.lay(raw.Width, raw.Height, fit.Circle)
	item.Region, item.Geometry = p.region, p.geometry
}

// otherSize looks for a part of quite another size, so that the reason can name it.
func (st *stage) otherSize(proof *pipeline.Proof, raw *raster.Plane, search raster.CircleSearch) {
	whole := st.radiusPx(search.X, search.Y, st.s.DiameterMM)
	search.RMin, search.RMax = max(0.6*whole, 2), max(1.4*whole, 3)
	if fit, err := raster.FindCircle(raw, search); err == nil {
		if d := st.diameterMM(fit.Circle); d >= proof.Low && d <= proof.High {
			return
		}
		proof.Value = st.diameterMM(fit.Circle)
		proof.Reason = fmt.Sprintf("found a diameter of %.3f mm, want %.3f to %.3f: another part", proof.Value, proof.Low, proof.High)
	}
}

func (st *stage) leaveEmpty(item *pipeline.Item, raw *raster.Plane) {
	x, y := st.centre(raw.Width, raw.Height)
	item.Region = pipeline.NewRegion(raw.Width, raw.Height, x, y, 0, nil)
	item.Geometry = st.geometry.WithOrigin(x, y)
}

func (st *stage) prove(item *pipeline.Item, proof pipeline.Proof, fit raster.CircleFit) {
	s := st.s
	proof.Value = st.diameterMM(fit.Circle)
	share := float64(fit.Points) / raster.DefaultRays
	switch {
	case proof.Value < proof.Low || proof.Value > proof.High:
		proof.Reason = fmt.Sprintf("found a diameter of %.3f mm, want %.3f to %.3f", proof.Value, proof.Low, proof.High)
	case share < s.MinEdgeShare:
		proof.Reason = fmt.Sprintf("found the edge in %.0f %% of directions, want %.0f %%", 100*share, 100*s.MinEdgeShare)
	default:
		proof.OK = true
	}
	item.Prove(proof)
	st.proveFocus(item, fit)
	if st.calibration != nil && !s.Scale.Off() {
		if r, err := drift.Scale(2*fit.R, 0, st.calibration, s.Scale); err == nil {
			item.Prove(r.Proof())
		}
	}
}

// proveFocus holds the edge against the calibration's, and against the bound in px.
func (st *stage) proveFocus(item *pipeline.Item, fit raster.CircleFit) {
	most := st.s.MaxEdgeWidthPx
	bound := pipeline.Proof{Name: pipeline.ProofFocus, Value: fit.EdgeWidth, High: most, Unit: "px", OK: most == 0 || fit.EdgeWidth > 0 && fit.EdgeWidth <= most}
	if !bound.OK {
		bound.Reason = fmt.Sprintf("the part's edge is %.2f px wide (10–90 %%), want at most %.2f: check focus", fit.EdgeWidth, most)
	}
	r, err := drift.Focus(fit.EdgeWidth, st.calibration, st.s.Focus)
	switch {
	case bound.OK && err == nil && !st.s.Focus.Off():
		item.Prove(r.Proof())
	case most > 0:
		item.Prove(bound)
	}
}

func (st *stage) measure(item *pipeline.Item, fit raster.CircleFit) {
	item.Measure("part_diameter_mm", st.diameterMM(fit.Circle), "mm")
	item.Measure("part_edge_points", float64(fit.Points), "")
	item.Measure("part_edge_rms_px", fit.RMS, "px")
	item.Measure("part_edge_width_px", fit.EdgeWidth, "px")
}
