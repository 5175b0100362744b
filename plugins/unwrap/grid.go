package unwrap

import (
	"math"

	"lapgate/pipeline"
)

// newAnnulus returns the ring of a part with the diameters and height given, in mm.
func newAnnulus(s Settings, centreX, centreY float64) pipeline.Annulus {
	in, out := 500*s.InnerDiameterMM, 500*s.OuterDiameterMM
	return pipeline.Annulus{CentreX: centreX, CentreY: centreY, InnerPx: s.InnerRadiusPx, OuterPx: s.OuterRadiusPx,
		InnerUM: in, OuterUM: out, SlantUM: math.Hypot(1000*s.HeightMM, out-in)}
}

// grid is how the ring is laid out flat: column for angle, row for height. Beyond one
// turn, overlap more columns repeat the first ones, so that nothing is cut at the seam.
type grid struct {
	pipeline.Annulus
	columns, rows, overlap int
}

// layOut takes one column a pixel of arc at the middle of the ring, and one row a pixel
// of its width.
func layOut(a pipeline.Annulus, overlapShare int) grid {
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
	_, radius := g.At(r)
	return 2 * math.Pi * radius / float64(g.columns), g.SlantUM / float64(g.rows)
}
