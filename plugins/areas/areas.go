package areas

import (
	"context"
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "areas", Version: "2", Scope: pipeline.ScopeView,
	Summary: "Finds stains, films and other areas larger than the background grid, to either side of a smooth surface.",
	Reads:   []string{pipeline.RawPlane, "calibration", "region", "geometry", "bad pixels", "saturated pixels", "defects"},
	Writes:  []string{"defects", "proofs", "measurements"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// leastSigma is the smallest unevenness that is divided by, DN.
const leastSigma = 1e-3

// Run implements pipeline.Stage. Areas are added to the defects already there; one that a
// defect there fills is left out.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	corrected, err := corrected(item)
	if err != nil {
		return err
	}
	switch {
	case item.Region == nil || item.Geometry == nil:
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	case item.Region.Mask().Width != corrected.Width || item.Region.Mask().Height != corrected.Height:
		return pipeline.Invalid("region: got %d × %d px, the picture has %d × %d", item.Region.Mask().Width, item.Region.Mask().Height, corrected.Width, corrected.Height)
	}
	coarse := raster.CoarseLevels(corrected, item.Region.Mask(), item.BadMask, st.s.CellPx)
	if err := ctx.Err(); err != nil {
		return err
	}
	residual, sigma, ok := coarse.Unevenness(st.s.Order)
	if !ok {
		st.proveEvenness(item, 0, false)
		return ctx.Err()
	}
	item.Measure("unevenness_dn", sigma, "DN")
	st.proveEvenness(item, sigma, true)
	st.find(item, coarse, residual, sigma)
	return ctx.Err()
}

func (st stage) proveEvenness(item *pipeline.Item, sigma float64, known bool) {
	if st.s.MaxUnevennessDN == 0 {
		return
	}
	p := pipeline.Proof{Name: pipeline.ProofEvenness, Value: sigma, High: st.s.MaxUnevennessDN, Unit: "DN", OK: known && sigma <= st.s.MaxUnevennessDN}
	switch {
	case !known:
		p.Reason = fmt.Sprintf("the region has too few cells of %d px to tell whether the surface is even", st.s.CellPx)
	case !p.OK:
		p.Reason = fmt.Sprintf("the surface wanders by %.2f DN rms about a smooth one, want at most %.2f: a film, a print, a stain or matt places over much of it", sigma, st.s.MaxUnevennessDN)
	}
	item.Prove(p)
}

func (st stage) find(item *pipeline.Item, coarse *raster.Coarse, residual *raster.Plane, sigma float64) {
	threshold := float32(max(st.s.KSigma*sigma, st.s.MinContrastDN))
	noise := raster.NewPlane(residual.Width, residual.Height)
	for i := range noise.Pix {
		noise.Pix[i] = float32(max(sigma, leastSigma))
	}
	defects := slices.Clone(item.Defects)
	for _, dark := range []bool{false, true} {
		plane := residual
		if dark {
			plane = negative(residual)
		}
		blobs := raster.Label(plane, threshold/2, threshold)
		m := raster.NewMeasurer(residual, noise, coarse.Valid, blobs)
		for i := range blobs {
			d := st.defect(item, m.Measure(i), blobs[i].Spans)
			d.PeakSigma /= max(sigma, leastSigma)
			d.Dark = dark
			if d.DiameterUM >= st.leastUM(item) && !filled(d, item.Defects) {
				defects = append(defects, d)
			}
		}
	}
	item.Defects = defects
}

func negative(p *raster.Plane) *raster.Plane {
	out := raster.NewPlane(p.Width, p.Height)
	for i, v := range p.Pix {
		out.Pix[i] = -v
	}
	return out
}

func (st stage) leastUM(item *pipeline.Item) float64 {
	if st.s.MinDiameterUM > 0 {
		return st.s.MinDiameterUM
	}
	_, _, scale := item.Geometry.ToStation(item.Region.CentreX, item.Region.CentreY)
	return 2 * float64(st.s.CellPx) * scale
}

// filled reports whether a defect of the fine search lies in an area and has at least half
// of its area: it is the same one, measured better. The bright edge of a stain is not.
func filled(d pipeline.Defect, fine []pipeline.Defect) bool {
	return slices.ContainsFunc(fine, func(f pipeline.Defect) bool {
		b := d.Box
		return f.Dark == d.Dark && 2*f.AreaUM2 >= d.AreaUM2 && f.XPx >= float64(b.X0) && f.XPx < float64(b.X1) && f.YPx >= float64(b.Y0) && f.YPx < float64(b.Y1)
	})
}

// defect turns what was measured in cells into a defect of the frame.
func (st stage) defect(item *pipeline.Item, b raster.Blemish, spans []raster.Span) pipeline.Defect {
	cell := float64(st.s.CellPx)
	x, y := cell*(b.X+0.5)-0.5, cell*(b.Y+0.5)-0.5
	u, v, scale := item.Geometry.ToStation(x, y)
	um := cell * scale
	pixels := cell * cell
	d := pipeline.Defect{
		Kind: pipeline.Stain, View: item.View, Place: pipeline.Place{XPx: x, YPx: y, UUM: u, VUM: v},
		AreaPx: b.AreaPx * st.s.CellPx * st.s.CellPx, AreaUM2: b.HalfArea * um * um,
		LengthUM: b.Length * um, WidthUM: b.Width * um, DiameterUM: b.Diameter * um,
		LengthPx: b.Length * cell, WidthPx: b.Width * cell, DiameterPx: b.Diameter * cell,
		AngleDeg: b.Angle, Flux: b.Flux * pixels, PeakDN: b.Peak, PeakSigma: b.PeakSNR, SNR: b.SNR,
		Box: pipeline.Box{X0: b.X0 * st.s.CellPx, Y0: b.Y0 * st.s.CellPx, X1: b.X1 * st.s.CellPx, Y1: b.Y1 * st.s.CellPx},
	}
	zone, ok := item.Region.ZoneAt(x, y)
	if !ok && len(spans) > 0 { // the middle of a ring lies off it
		s := spans[len(spans)/2]
		zone, _ = item.Region.ZoneAt(cell*(float64(s.X0+s.X1)/2)-0.5, cell*(float64(s.Y)+0.5)-0.5)
	}
	d.Zone = zone.Name
	if zone.EdgeDistancePx != nil {
		d.EdgeDistanceUM = zone.EdgeDistancePx(x, y) * scale
	}
	d.Saturated = saturated(item.SaturatedAt, d.Box)
	return d
}

// saturatedShare is the share of saturated pixels from which an area counts as saturated.
const saturatedShare = 0.01

func saturated(m *raster.Mask, b pipeline.Box) bool {
	if m == nil {
		return false
	}
	n := 0
	for y := max(b.Y0, 0); y < min(b.Y1, m.Height); y++ {
		for x := max(b.X0, 0); x < min(b.X1, m.Width); x++ {
			if m.At(x, y) {
				n++
			}
		}
	}
	return float64(n) > saturatedShare*float64((b.X1-b.X0)*(b.Y1-b.Y0))
}
