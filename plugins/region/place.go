package region

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// place is a region with its geometry.
type place struct {
	region   *pipeline.Region
	geometry pipeline.Geometry
}

// fixed returns the place of a shape that does not depend on what the frame shows; frames
// of one size share it.
func (st *stage) fixed(item *pipeline.Item) (place, error) {
	width, height, err := frameSize(item)
	if err != nil {
		return place{}, err
	}
	st.mu.Lock()
	defer st.mu.Unlock()
	if r := st.last.region; r != nil {
		if w, h := r.Size(); w == width && h == height {
			return st.last, nil
		}
	}
	p, err := st.make(width, height)
	if err == nil {
		st.last = p
	}
	return p, err
}

func frameSize(item *pipeline.Item) (width, height int, err error) {
	if p, ok := item.Planes[pipeline.RawPlane]; ok {
		return p.Pixels.Width, p.Pixels.Height, nil
	}
	if len(item.Frames) == 0 {
		return 0, 0, pipeline.Invalid("view %q has no frame", item.View)
	}
	return item.Frames[0].Raw.Width, item.Frames[0].Raw.Height, nil
}

func (st *stage) make(width, height int) (place, error) {
	switch st.s.Shape {
	case Circle:
		x, y := st.centre(width, height)
		return st.lay(width, height, raster.Circle{X: x, Y: y, R: st.radiusPx(x, y, st.s.DiameterMM)}), nil
	case Polygon:
		return st.fill(width, height, polygonMask(width, height, st.s.Polygon).Spans(), polygonArea(st.s.Polygon), outlineOf(st.s.Polygon)), nil
	case MaskImage:
		if st.mask.Width != width || st.mask.Height != height {
			return place{}, pipeline.Invalid("mask_file %s: got %d × %d px, the frame has %d × %d", st.s.MaskFile, st.mask.Width, st.mask.Height, width, height)
		}
		return st.fill(width, height, st.mask.Spans(), float64(st.mask.Count()), nil), nil
	}
	whole := make([]raster.Span, height)
	for y := range whole {
		whole[y] = raster.Span{Y: y, X1: width}
	}
	return st.fill(width, height, whole, float64(width*height), nil), nil
}

// lay puts the zones over a circle.
func (st *stage) lay(width, height int, c raster.Circle) place {
	list := st.s.Zones
	if len(list) == 0 {
		list = []ZoneSettings{{Name: "all"}}
	}
	var zones []pipeline.Zone
	for _, z := range list {
		outer, inner := z.outer(st.s), z.InnerDiameterMM
		area := math.Pi / 4 * (outer*outer - inner*inner)
		ro, ri := st.radiusPx(c.X, c.Y, outer), st.radiusPx(c.X, c.Y, inner)
		zones = append(zones, pipeline.Zone{Name: z.Name, AreaMM2: area, EquivalentDiameterMM: math.Sqrt(4 * area / math.Pi), OuterDiameterMM: outer, InnerDiameterMM: inner,
			Spans: ringSpans(width, height, c.X, c.Y, ri, ro)}.Edged(pipeline.Outline{CentreX: c.X, CentreY: c.Y, InnerPx: ri, OuterPx: ro}))
	}
	return place{pipeline.NewRegion(width, height, c.X, c.Y, c.R, zones), st.geometry.WithOrigin(c.X, c.Y)}
}

// fill makes a region of one zone.
func (st *stage) fill(width, height int, spans []raster.Span, areaPx float64, edge *pipeline.Outline) place {
	s := raster.ShapeOf(spans)
	if s.Area == 0 {
		s.X, s.Y = float64(width-1)/2, float64(height-1)/2
	}
	_, _, scale := st.geometry.ToStation(s.X, s.Y)
	area := areaPx * scale * scale / 1e6
	zone := pipeline.Zone{Name: "all", Spans: spans, AreaMM2: area, EquivalentDiameterMM: math.Sqrt(4 * area / math.Pi)}
	if edge != nil {
		zone = zone.Edged(*edge)
	}
	return place{pipeline.NewRegion(width, height, s.X, s.Y, 0, []pipeline.Zone{zone}), st.geometry.WithOrigin(s.X, s.Y)}
}
