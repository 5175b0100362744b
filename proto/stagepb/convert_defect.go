package stagepb

import (
	"fmt"

	"lapgate/pipeline"
)

// FromDefect encodes a defect.
func FromDefect(d pipeline.Defect) *Defect {
	return &Defect{
		Kind: string(d.Kind), Id: int32(d.ID), View: d.View, Zone: d.Zone,
		XPx: d.XPx, YPx: d.YPx, UUm: d.UUM, VUm: d.VUM, PartUUm: d.PartUUM, PartVUm: d.PartVUM, PartAngleKnown: d.PartAngleKnown,
		EdgeDistanceUm: d.EdgeDistanceUM, AreaPx: int32(d.AreaPx), AreaUm2: d.AreaUM2,
		LengthUm: d.LengthUM, WidthUm: d.WidthUM, DiameterUm: d.DiameterUM,
		DiameterFluxUm: d.DiameterFluxUM, DiameterFluxUncertaintyUm: d.DiameterFluxUncertaintyUM, SlopeMrad: d.SlopeMrad,
		LengthPx: d.LengthPx, WidthPx: d.WidthPx, DiameterPx: d.DiameterPx, AngleDeg: d.AngleDeg,
		Flux: d.Flux, PeakDn: d.PeakDN, PeakSigma: d.PeakSigma, Snr: d.SNR, Dark: d.Dark, Saturated: d.Saturated,
		X0: int32(d.Box.X0), Y0: int32(d.Box.Y0), X1: int32(d.Box.X1), Y1: int32(d.Box.Y1),
		PathXy: fromPath(d.Path), SeenIn: d.SeenIn,
		MergedFrom: each(d.MergedFrom, func(r pipeline.Ref) *DefectRef { return &DefectRef{View: r.View, Id: int32(r.ID)} }),
	}
}

// ToDefect decodes a defect. The error is for a path with half a point.
func ToDefect(d *Defect) (pipeline.Defect, error) {
	path, err := toPath(d.GetPathXy())
	return pipeline.Defect{
		Kind: pipeline.Kind(d.GetKind()), ID: int(d.GetId()), View: d.GetView(), Zone: d.GetZone(),
		Place: pipeline.Place{XPx: d.GetXPx(), YPx: d.GetYPx(), UUM: d.GetUUm(), VUM: d.GetVUm(),
			PartUUM: d.GetPartUUm(), PartVUM: d.GetPartVUm(), PartAngleKnown: d.GetPartAngleKnown()},
		EdgeDistanceUM: d.GetEdgeDistanceUm(), AreaPx: int(d.GetAreaPx()), AreaUM2: d.GetAreaUm2(),
		LengthUM: d.GetLengthUm(), WidthUM: d.GetWidthUm(), DiameterUM: d.GetDiameterUm(),
		DiameterFluxUM: d.GetDiameterFluxUm(), DiameterFluxUncertaintyUM: d.GetDiameterFluxUncertaintyUm(), SlopeMrad: d.GetSlopeMrad(),
		LengthPx: d.GetLengthPx(), WidthPx: d.GetWidthPx(), DiameterPx: d.GetDiameterPx(), AngleDeg: d.GetAngleDeg(),
		Flux: d.GetFlux(), PeakDN: d.GetPeakDn(), PeakSigma: d.GetPeakSigma(), SNR: d.GetSnr(), Dark: d.GetDark(), Saturated: d.GetSaturated(),
		Box:  pipeline.Box{X0: int(d.GetX0()), Y0: int(d.GetY0()), X1: int(d.GetX1()), Y1: int(d.GetY1())},
		Path: path, SeenIn: d.GetSeenIn(),
		MergedFrom: each(d.GetMergedFrom(), func(r *DefectRef) pipeline.Ref { return pipeline.Ref{View: r.GetView(), ID: int(r.GetId())} }),
	}, err
}

// FromDefects encodes a list.
func FromDefects(list []pipeline.Defect) []*Defect { return each(list, FromDefect) }

// ToDefects decodes a list.
func ToDefects(list []*Defect) ([]pipeline.Defect, error) {
	var out []pipeline.Defect
	for i, d := range list {
		defect, err := ToDefect(d)
		if err != nil {
			return nil, fmt.Errorf("defects[%d]: %w", i, err)
		}
		out = append(out, defect)
	}
	return out, nil
}

func fromPath(path []pipeline.Point) []float64 {
	var out []float64
	for _, p := range path {
		out = append(out, p.X, p.Y)
	}
	return out
}

func toPath(xy []float64) ([]pipeline.Point, error) {
	if len(xy)%2 != 0 {
		return nil, fmt.Errorf("path_xy: got %d numbers, want x and y of each point", len(xy))
	}
	var out []pipeline.Point
	for i := 0; i < len(xy); i += 2 {
		out = append(out, pipeline.Point{X: xy[i], Y: xy[i+1]})
	}
	return out, nil
}
