package unwrap

import (
	"math"

	"lapgate/pipeline"
)

// Annulus is the surface of a round part (bore, rim or cone) that a camera sees as a
// ring, looking along its axis. Heights lie evenly along the ring's radius. It is a
// pipeline.Geometry: u is the arc from +x towards +y in the picture, −πR to πR with R
// the part's radius at that height; v is the length along the surface from its middle,
// towards the ring's outer edge.
type Annulus struct {
	CentreX, CentreY float64 // px
	InnerPx, OuterPx float64 // radii of the ring
	InnerUM, OuterUM float64 // radii of the part there; equal for a cylinder
	SlantUM          float64 // along the surface, from one edge to the other
}

// NewAnnulus returns the ring of a part with the diameters and height given, in mm.
func NewAnnulus(s Settings, centreX, centreY float64) Annulus {
	in, out := 500*s.InnerDiameterMM, 500*s.OuterDiameterMM
	return Annulus{centreX, centreY, s.InnerRadiusPx, s.OuterRadiusPx, in, out, math.Hypot(1000*s.HeightMM, out-in)}
}

// at returns how far out on the ring a radius lies, 0 to 1, and the part's radius there.
func (a Annulus) at(radiusPx float64) (t, radiusUM float64) {
	t = (radiusPx - a.InnerPx) / (a.OuterPx - a.InnerPx)
	return t, a.InnerUM + t*(a.OuterUM-a.InnerUM)
}

// ToStation implements pipeline.Geometry. The scale is that of areas: √(along · across).
func (a Annulus) ToStation(x, y float64) (u, v, umPerPx float64) {
	r := math.Hypot(x-a.CentreX, y-a.CentreY)
	t, radius := a.at(r)
	around := radius / max(r, 1e-9) // µm of arc per px
	return radius * math.Atan2(y-a.CentreY, x-a.CentreX), (t - 0.5) * a.SlantUM, math.Sqrt(around * a.SlantUM / (a.OuterPx - a.InnerPx))
}

// ToPixel implements pipeline.Geometry.
func (a Annulus) ToPixel(u, v float64) (x, y float64) {
	t := v/a.SlantUM + 0.5
	r := a.InnerPx + t*(a.OuterPx-a.InnerPx)
	s, c := math.Sincos(u / (a.InnerUM + t*(a.OuterUM-a.InnerUM)))
	return a.CentreX + r*c, a.CentreY + r*s
}

// WithOrigin implements pipeline.Geometry: the ring's centre moves.
func (a Annulus) WithOrigin(x, y float64) pipeline.Geometry {
	a.CentreX, a.CentreY = x, y
	return a
}

// AreaMM2 returns the area of the surface: the frustum's π·(R₁ + R₂)·slant.
func (a Annulus) AreaMM2() float64 { return math.Pi * (a.InnerUM + a.OuterUM) * a.SlantUM / 1e6 }

// grid is how the ring is laid out flat: column for angle, row for height. Beyond one
// turn, overlap more columns repeat the first ones, so that nothing is cut at the seam.
type grid struct {
	Annulus
	columns, rows, overlap int
}

// layOut takes one column a pixel of arc at the middle of the ring, and one row a pixel
// of its width.
func (a Annulus) layOut(overlapShare int) grid {
	columns := max(int(math.Round(math.Pi*(a.InnerPx+a.OuterPx))), 8)
	return grid{a, columns, max(int(math.Round(a.OuterPx-a.InnerPx)), 1), columns / overlapShare}
}

// polar returns the angle and the radius in px of a point of the flat picture.
func (g grid) polar(column, row float64) (angle, radiusPx float64) {
	return 2*math.Pi*column/float64(g.columns) - math.Pi, g.InnerPx + (row+0.5)/float64(g.rows)*(g.OuterPx-g.InnerPx)
}

// camera returns the frame's pixel of a point of the flat picture.
func (g grid) camera(column, row float64) (x, y float64) {
	angle, r := g.polar(column, row)
	s, c := math.Sincos(angle)
	return g.CentreX + r*c, g.CentreY + r*s
}

// scales returns the µm that a column and a row cover at a row.
func (g grid) scales(row float64) (column, rowUM float64) {
	_, r := g.polar(0, row)
	_, radius := g.at(r)
	return 2 * math.Pi * radius / float64(g.columns), g.SlantUM / float64(g.rows)
}
