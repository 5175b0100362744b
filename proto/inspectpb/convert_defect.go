package inspectpb

import "lapgate/pipeline"

// FromDefect encodes a defect.
func FromDefect(d pipeline.Defect) *Defect {
	return &Defect{
		Id: clamp32(d.ID), Kind: string(d.Kind), View: d.View, Zone: d.Zone, Place: fromPlace(d.Place),
		EdgeDistanceUm: d.EdgeDistanceUM, AreaPx: clamp32(d.AreaPx), AreaUm2: d.AreaUM2,
		LengthUm: d.LengthUM, WidthUm: d.WidthUM, DiameterUm: d.DiameterUM,
		DiameterFluxUm: d.DiameterFluxUM, DiameterFluxUncertaintyUm: d.DiameterFluxUncertaintyUM, SlopeMrad: d.SlopeMrad,
		LengthPx: d.LengthPx, WidthPx: d.WidthPx, DiameterPx: d.DiameterPx, AngleDeg: d.AngleDeg,
		Flux: d.Flux, PeakDn: d.PeakDN, PeakSigma: d.PeakSigma, Snr: d.SNR, Dark: d.Dark, Saturated: d.Saturated,
		Box:  &Box{X0: clamp32(d.Box.X0), Y0: clamp32(d.Box.Y0), X1: clamp32(d.Box.X1), Y1: clamp32(d.Box.Y1)},
		Path: each(d.Path, func(p pipeline.Point) *Point { return &Point{X: p.X, Y: p.Y} }), SeenIn: d.SeenIn,
		MergedFrom: each(d.MergedFrom, func(r pipeline.Ref) *DefectRef { return &DefectRef{View: r.View, Id: clamp32(r.ID)} }),
	}
}

// ToDefect decodes a defect. Kinds are words, not an enum: one that this program does
// not know is kept.
func ToDefect(d *Defect) pipeline.Defect {
	b := d.GetBox()
	return pipeline.Defect{
		ID: int(d.GetId()), Kind: pipeline.Kind(d.GetKind()), View: d.GetView(), Zone: d.GetZone(), Place: toPlace(d.GetPlace()),
		EdgeDistanceUM: d.GetEdgeDistanceUm(), AreaPx: int(d.GetAreaPx()), AreaUM2: d.GetAreaUm2(),
		LengthUM: d.GetLengthUm(), WidthUM: d.GetWidthUm(), DiameterUM: d.GetDiameterUm(),
		DiameterFluxUM: d.GetDiameterFluxUm(), DiameterFluxUncertaintyUM: d.GetDiameterFluxUncertaintyUm(), SlopeMrad: d.GetSlopeMrad(),
		LengthPx: d.GetLengthPx(), WidthPx: d.GetWidthPx(), DiameterPx: d.GetDiameterPx(), AngleDeg: d.GetAngleDeg(),
		Flux: d.GetFlux(), PeakDN: d.GetPeakDn(), PeakSigma: d.GetPeakSigma(), SNR: d.GetSnr(), Dark: d.GetDark(), Saturated: d.GetSaturated(),
		Box:  pipeline.Box{X0: int(b.GetX0()), Y0: int(b.GetY0()), X1: int(b.GetX1()), Y1: int(b.GetY1())},
		Path: each(d.GetPath(), func(p *Point) pipeline.Point { return pipeline.Point{X: p.GetX(), Y: p.GetY()} }), SeenIn: d.GetSeenIn(),
		MergedFrom: each(d.GetMergedFrom(), func(r *DefectRef) pipeline.Ref { return pipeline.Ref{View: r.GetView(), ID: int(r.GetId())} }),
	}
}

// FromDefects encodes a list.
func FromDefects(d []pipeline.Defect) []*Defect { return each(d, FromDefect) }

// ToDefects decodes a list.
func ToDefects(d []*Defect) []pipeline.Defect { return each(d, ToDefect) }

func fromPlace(p pipeline.Place) *Place {
	return &Place{XPx: p.XPx, YPx: p.YPx, UUm: p.UUM, VUm: p.VUM, PartUUm: p.PartUUM, PartVUm: p.PartVUM, PartAngleKnown: p.PartAngleKnown}
}

func toPlace(p *Place) pipeline.Place {
	return pipeline.Place{XPx: p.GetXPx(), YPx: p.GetYPx(), UUM: p.GetUUm(), VUM: p.GetVUm(),
		PartUUM: p.GetPartUUm(), PartVUM: p.GetPartVUm(), PartAngleKnown: p.GetPartAngleKnown()}
}
