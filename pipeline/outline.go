package pipeline

import "math"

// Outline is the edge of a zone: two circles about one centre, or a polygon. As data it
// can be sent to a stage in another process, which then measures the same distances.
type Outline struct {
	CentreX, CentreY float64 // px
	InnerPx, OuterPx float64 // radii; inner 0 = no hole, outer 0 = it is a polygon
	Corners          []Point
}

// Distance returns how far inside the edge a point is, in px; negative outside.
func (o Outline) Distance(x, y float64) float64 {
	if o.OuterPx == 0 {
		return o.polygonDistance(x, y)
	}
	d := math.Hypot(x-o.CentreX, y-o.CentreY)
	if o.InnerPx == 0 {
		return o.OuterPx - d
	}
	return min(o.OuterPx-d, d-o.InnerPx)
}

// polygonDistance is that to the nearest side.
func (o Outline) polygonDistance(x, y float64) float64 {
	best := math.Inf(1)
	for i, a := range o.Corners {
		b := o.Corners[(i+1)%len(o.Corners)]
		best = min(best, sideDistance(a, b, x, y))
	}
	if o.inPolygon(x, y) {
		return best
	}
	return -best
}

// inPolygon is by the even–odd rule.
func (o Outline) inPolygon(x, y float64) bool {
	in := false
	for i, a := range o.Corners {
		b := o.Corners[(i+1)%len(o.Corners)]
		if (a.Y > y) != (b.Y > y) && x < a.X+(y-a.Y)/(b.Y-a.Y)*(b.X-a.X) {
			in = !in
		}
	}
	return in
}

func sideDistance(a, b Point, x, y float64) float64 {
	dx, dy := b.X-a.X, b.Y-a.Y
	t := 0.
	if n := dx*dx + dy*dy; n > 0 {
		t = min(max(((x-a.X)*dx+(y-a.Y)*dy)/n, 0), 1)
	}
	return math.Hypot(x-a.X-t*dx, y-a.Y-t*dy)
}

// Edged gives a zone its outline, and the distances from it.
func (z Zone) Edged(o Outline) Zone {
	z.Outline, z.EdgeDistancePx = &o, o.Distance
	return z
}
