package stagepb

import (
	"fmt"

	"lapgate/pipeline"
)

// FromGeometry encodes a geometry; the error is for one that the contract cannot carry.
// nil is nil.
func FromGeometry(g pipeline.Geometry) (*Geometry, error) {
	switch g := g.(type) {
	case nil:
		return nil, nil
	case pipeline.Planar:
		return &Geometry{Planar: fromPlanar(g)}, nil
	case pipeline.Distorted:
		l := g.Lens
		return &Geometry{Planar: fromPlanar(g.Planar),
			Distortion: &Distortion{K1: l.K1, K2: l.K2, CentreX: l.CentreX, CentreY: l.CentreY, NormPx: l.NormPx}}, nil
	case pipeline.Annulus:
		return &Geometry{Annulus: &Annulus{CentreX: g.CentreX, CentreY: g.CentreY, InnerPx: g.InnerPx, OuterPx: g.OuterPx,
			InnerUm: g.InnerUM, OuterUm: g.OuterUM, SlantUm: g.SlantUM}}, nil
	}
	return nil, fmt.Errorf("a geometry of type %T cannot be sent to a stage outside; put that stage before the one that makes it", g)
}

// ToGeometry decodes a geometry; nil is nil.
func ToGeometry(g *Geometry) pipeline.Geometry {
	if g == nil {
		return nil
	}
	if a := g.GetAnnulus(); a != nil {
		return pipeline.Annulus{CentreX: a.GetCentreX(), CentreY: a.GetCentreY(), InnerPx: a.GetInnerPx(), OuterPx: a.GetOuterPx(),
			InnerUM: a.GetInnerUm(), OuterUM: a.GetOuterUm(), SlantUM: a.GetSlantUm()}
	}
	p := g.GetPlanar()
	planar := pipeline.Planar{OriginX: p.GetOriginX(), OriginY: p.GetOriginY(), UMPerPx: p.GetUmPerPx(), RotationDeg: p.GetRotationDeg(), Mirror: p.GetMirror()}
	l := g.GetDistortion()
	if l == nil {
		return planar
	}
	return pipeline.Distorted{Planar: planar,
		Lens: pipeline.Distortion{K1: l.GetK1(), K2: l.GetK2(), CentreX: l.GetCentreX(), CentreY: l.GetCentreY(), NormPx: l.GetNormPx()}}
}

func fromPlanar(p pipeline.Planar) *Planar {
	return &Planar{OriginX: p.OriginX, OriginY: p.OriginY, UmPerPx: p.UMPerPx, RotationDeg: p.RotationDeg, Mirror: p.Mirror}
}

// FromRegion encodes a region; nil is nil. An edge travels where it is an outline.
func FromRegion(r *pipeline.Region) *Region {
	if r == nil {
		return nil
	}
	width, height := r.Size()
	return &Region{CentreX: r.CentreX, CentreY: r.CentreY, RadiusPx: r.RadiusPx, Width: int32(width), Height: int32(height),
		Zones: each(r.Zones, func(z pipeline.Zone) *Zone {
			return &Zone{Name: z.Name, AreaMm2: z.AreaMM2, EquivalentDiameterMm: z.EquivalentDiameterMM, Runs: fromSpans(z.Spans),
				OuterDiameterMm: z.OuterDiameterMM, InnerDiameterMm: z.InnerDiameterMM, Outline: fromOutline(z.Outline), NoEdge: z.EdgeDistancePx == nil}
		})}
}

// maxZones is what a Region can hold.
const maxZones = 255

func fromOutline(o *pipeline.Outline) *Outline {
	if o == nil {
		return nil
	}
	return &Outline{CentreX: o.CentreX, CentreY: o.CentreY, InnerPx: o.InnerPx, OuterPx: o.OuterPx, CornersXy: fromPath(o.Corners)}
}

func toOutline(o *Outline) (pipeline.Outline, error) {
	corners, err := toPath(o.GetCornersXy())
	return pipeline.Outline{CentreX: o.GetCentreX(), CentreY: o.GetCentreY(), InnerPx: o.GetInnerPx(), OuterPx: o.GetOuterPx(), Corners: corners}, err
}

// ToRegion decodes a region; nil is nil. Only zones with an outline have EdgeDistancePx.
func ToRegion(r *Region) (*pipeline.Region, error) {
	if r == nil {
		return nil, nil
	}
	width, height := int(r.GetWidth()), int(r.GetHeight())
	if err := checkSides(width, height); err != nil {
		return nil, fmt.Errorf("region: %w", err)
	}
	if len(r.GetZones()) > maxZones {
		return nil, fmt.Errorf("region: got %d zones, want at most %d", len(r.GetZones()), maxZones)
	}
	var zones []pipeline.Zone
	for _, z := range r.GetZones() {
		spans, err := toSpans(z.GetRuns(), width, height)
		if err != nil {
			return nil, fmt.Errorf("region: zone %q: %w", z.GetName(), err)
		}
		zone := pipeline.Zone{Name: z.GetName(), Spans: spans, AreaMM2: z.GetAreaMm2(), EquivalentDiameterMM: z.GetEquivalentDiameterMm(),
			OuterDiameterMM: z.GetOuterDiameterMm(), InnerDiameterMM: z.GetInnerDiameterMm()}
		if z.GetOutline() != nil {
			o, err := toOutline(z.GetOutline())
			if err != nil {
				return nil, fmt.Errorf("region: zone %q: outline: %w", z.GetName(), err)
			}
			zone = zone.Edged(o)
		}
		zones = append(zones, zone)
	}
	return pipeline.NewRegion(width, height, r.GetCentreX(), r.GetCentreY(), r.GetRadiusPx(), zones), nil
}
