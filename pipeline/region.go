package pipeline

import "lapgate/pipeline/raster"

// Zone is a named part of the region with limits of its own: an analytic shape and
// the pixels in it, as row spans.
type Zone struct {
	Name                 string
	Spans                []raster.Span
	AreaMM2              float64 // of the analytic shape
	EquivalentDiameterMM float64 // of the circle of equal area
	OuterDiameterMM      float64 // of a zone about the part's centre; 0 = it is no circle
	InnerDiameterMM      float64
	Outline              *Outline // nil = the edge is no simple shape, or there is none
	// EdgeDistancePx returns how far inside the zone's own edge a point is, in px
	// (negative outside). Nil where the shape has no edge (whole frame).
	EdgeDistancePx func(x, y float64) float64
}

// Region is where limits hold on the part. Zones are in order of precedence: a point
// belongs to the first zone that contains it.
type Region struct {
	CentreX, CentreY float64 // px
	RadiusPx         float64 // 0 where the part's outline is no circle
	Zones            []Zone
	mask             *raster.Mask
	owner            []uint8 // zone number + 1 of each pixel, 0 outside
}

// NewRegion returns a region over a frame of width × height pixels. At most 255 zones.
func NewRegion(width, height int, centreX, centreY, radiusPx float64, zones []Zone) *Region {
	r := &Region{CentreX: centreX, CentreY: centreY, RadiusPx: radiusPx, Zones: zones,
		mask: raster.NewMask(width, height), owner: make([]uint8, width*height)}
	for i := len(zones) - 1; i >= 0; i-- {
		r.mask.FillSpans(zones[i].Spans)
		r.own(zones[i].Spans, uint8(i+1))
	}
	return r
}

func (r *Region) own(spans []raster.Span, n uint8) {
	for _, s := range spans {
		if s.Y < 0 || s.Y >= r.mask.Height {
			continue
		}
		for x := max(s.X0, 0); x < min(s.X1, r.mask.Width); x++ {
			r.owner[s.Y*r.mask.Width+x] = n
		}
	}
}

// Mask returns the pixels of all zones together. It must not be changed.
func (r *Region) Mask() *raster.Mask { return r.mask }

// ZoneAt returns the zone that owns the pixel nearest to (x, y).
func (r *Region) ZoneAt(x, y float64) (Zone, bool) {
	ix, iy := int(x+0.5), int(y+0.5)
	if !r.mask.At(ix, iy) {
		return Zone{}, false
	}
	return r.Zones[r.owner[iy*r.mask.Width+ix]-1], true
}
