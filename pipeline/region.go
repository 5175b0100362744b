package pipeline

import (
	"sync"

	"lapgate/pipeline/raster"
)

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
	width, height    int
	inside           raster.Rows
	zones            []raster.Rows
	mask             func() *raster.Mask
}

// NewRegion returns a region over a frame of width × height pixels.
func NewRegion(width, height int, centreX, centreY, radiusPx float64, zones []Zone) *Region {
	r := &Region{CentreX: centreX, CentreY: centreY, RadiusPx: radiusPx, Zones: zones, width: width, height: height}
	var all []raster.Span
	for _, z := range zones {
		r.zones = append(r.zones, raster.NewRows(z.Spans, width, height))
		all = append(all, r.zones[len(r.zones)-1].Spans()...)
	}
	r.inside = raster.NewRows(all, width, height)
	r.mask = sync.OnceValue(func() *raster.Mask {
		m := raster.NewMask(width, height)
		m.FillSpans(r.inside.Spans())
		return m
	})
	return r
}

// Size returns width and height of the frame, in px.
func (r *Region) Size() (width, height int) { return r.width, r.height }

// Inside returns the pixels of all zones together.
func (r *Region) Inside() raster.Rows { return r.inside }

// Mask returns the pixels of all zones together as a mask, which takes time and memory by
// the area of the frame when it is first asked for. It must not be changed.
func (r *Region) Mask() *raster.Mask { return r.mask() }

// ZoneAt returns the zone that owns the pixel nearest to (x, y).
func (r *Region) ZoneAt(x, y float64) (Zone, bool) {
	ix, iy := int(x+0.5), int(y+0.5)
	for i, rows := range r.zones {
		if rows.At(ix, iy) {
			return r.Zones[i], true
		}
	}
	return Zone{}, false
}
