package blobs

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// defect turns what was measured of a blob into a defect: with its zone, its place on
// the station and its sizes in µm at the scale where it lies.
func (st stage) defect(item *pipeline.Item, b raster.Blemish, spans []raster.Span) pipeline.Defect {
	u, v, scale := item.Geometry.ToStation(b.X, b.Y)
	d := pipeline.Defect{
		Kind: st.s.kind(b.Length, b.Width), View: item.View,
		Place:  pipeline.Place{XPx: b.X, YPx: b.Y, UUM: u, VUM: v},
		AreaPx: b.AreaPx, AreaUM2: b.HalfArea * scale * scale,
		LengthUM: b.Length * scale, WidthUM: b.Width * scale, DiameterUM: b.Diameter * scale,
		LengthPx: b.Length, WidthPx: b.Width, DiameterPx: b.Diameter,
		AngleDeg: b.Angle, Flux: b.Flux, PeakDN: b.Peak, PeakSigma: b.PeakSNR, SNR: b.SNR, Dark: b.Dark,
		Saturated: touches(item.SaturatedAt, spans),
		Box:       pipeline.Box{X0: b.X0, Y0: b.Y0, X1: b.X1, Y1: b.Y1},
	}
	SizeByFlux(&d, item)
	for _, p := range b.Path {
		d.Path = append(d.Path, pipeline.Point(p))
	}
	zone, ok := item.Region.ZoneAt(b.X, b.Y)
	if !ok { // a bent defect's centre may lie beside it
		zone, _ = item.Region.ZoneAt(float64(b.PeakX), float64(b.PeakY))
	}
	d.Zone = zone.Name
	if zone.EdgeDistancePx != nil {
		d.EdgeDistanceUM = zone.EdgeDistancePx(b.X, b.Y) * scale
	}
	return d
}

// SizeByFlux sets the diameter by the calibration's sizing curve where the outline does
// not tell it: a compact, bright defect under twice the blur that is not saturated. Where
// the light was proven as a share of the calibrated one, the flux is divided by it.
func SizeByFlux(d *pipeline.Defect, item *pipeline.Item) {
	if item.Calibration == nil || item.Calibration.Sizing == nil || d.Dark || d.Saturated || d.Kind != pipeline.Dig {
		return
	}
	curve := *item.Calibration.Sizing
	if curve.Resolved(d.DiameterPx) {
		return
	}
	flux := d.Flux
	for _, p := range item.Proofs {
		if p.Name == pipeline.ProofLight && p.Unit == "1" && p.OK && p.Value > 0 {
			flux = d.Flux / p.Value
		}
	}
	if um, uncertainty, ok := curve.DiameterUM(flux, d.SNR); ok {
		d.DiameterFluxUM, d.DiameterFluxUncertaintyUM = um, uncertainty
	}
}

// touches reports whether a pixel of the spans, or one beside them, is in the mask: the
// matched filter spreads a saturated pixel no further.
func touches(m *raster.Mask, spans []raster.Span) bool {
	if m == nil {
		return false
	}
	for _, s := range spans {
		for y := s.Y - 1; y <= s.Y+1; y++ {
			for x := s.X0 - 1; x <= s.X1; x++ {
				if m.At(x, y) {
					return true
				}
			}
		}
	}
	return false
}
