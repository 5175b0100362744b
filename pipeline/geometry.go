package pipeline

import "math"

// Place is a point of a defect in three coordinate systems: the camera's frame as
// received, the station (relative to the centre of the region, as the part lay), and
// the part (turned back by the part's angle, where that is known).
type Place struct {
	XPx            float64 `json:"x_px"`
	YPx            float64 `json:"y_px"`
	UUM            float64 `json:"u_um"`
	VUM            float64 `json:"v_um"` // µm from the centre of the region, v up
	PartUUM        float64 `json:"part_u_um"`
	PartVUM        float64 `json:"part_v_um"` // valid only when PartAngleKnown
	PartAngleKnown bool    `json:"part_angle_known"`
}

// Geometry maps pixels of one view to the part and back.
type Geometry interface {
	// ToStation returns µm from the centre of the region, v up, and the local scale.
	ToStation(xPx, yPx float64) (uUM, vUM, umPerPx float64)
	// ToPixel is the inverse of ToStation.
	ToPixel(uUM, vUM float64) (xPx, yPx float64)
	// WithOrigin returns the same mapping with the region's centre at the pixel given.
	WithOrigin(xPx, yPx float64) Geometry
}

// Planar is a flat part seen squarely: one scale, a rotation and perhaps a mirror.
// u = s·(cos r·dx' − sin r·dy'), v = s·(sin r·dx' + cos r·dy'), with
// dx' = ±(x − OriginX) (minus when Mirror), dy' = −(y − OriginY).
type Planar struct {
	OriginX, OriginY float64 // px
	UMPerPx          float64
	RotationDeg      float64
	Mirror           bool
}

// ToStation implements Geometry.
func (p Planar) ToStation(x, y float64) (float64, float64, float64) {
	dx, dy := x-p.OriginX, -(y - p.OriginY)
	if p.Mirror {
		dx = -dx
	}
	s, c := math.Sincos(p.RotationDeg * math.Pi / 180)
	return p.UMPerPx * (c*dx - s*dy), p.UMPerPx * (s*dx + c*dy), p.UMPerPx
}

// ToPixel implements Geometry.
func (p Planar) ToPixel(u, v float64) (float64, float64) {
	s, c := math.Sincos(p.RotationDeg * math.Pi / 180)
	dx, dy := (c*u+s*v)/p.UMPerPx, (-s*u+c*v)/p.UMPerPx
	if p.Mirror {
		dx = -dx
	}
	return p.OriginX + dx, p.OriginY - dy
}

// WithOrigin implements Geometry.
func (p Planar) WithOrigin(x, y float64) Geometry {
	p.OriginX, p.OriginY = x, y
	return p
}
