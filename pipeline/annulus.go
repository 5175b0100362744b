package pipeline

import "math"

// Annulus is the surface of a round part (bore, rim or cone) that a camera sees as a
// ring, looking along its axis. Heights lie evenly along the ring's radius. As a Geometry,
// u is the arc from +x towards +y in the picture, −πR to πR with R the part's radius at
// that height; v is the length along the surface from its middle, towards the ring's outer
// edge.
type Annulus struct {
	CentreX, CentreY float64 // px
	InnerPx, OuterPx float64 // radii of the ring
	InnerUM, OuterUM float64 // radii of the part there; equal for a cylinder
	SlantUM          float64 // along the surface, from one edge to the other
}

// Check refuses a ring that has no width, on the picture or on the part.
func (a Annulus) Check() error {
	if !finite(a.CentreX, a.CentreY, a.InnerPx, a.OuterPx, a.InnerUM, a.OuterUM, a.SlantUM) || !(a.InnerPx > 0 && a.OuterPx > a.InnerPx) {
		return Invalid("annulus: got %+v, want finite numbers, an inner radius above 0 px and a larger outer one", a)
	}
	if !(a.InnerUM > 0 && a.OuterUM > 0 && a.SlantUM > 0 && a.SlantUM >= math.Abs(a.OuterUM-a.InnerUM)*(1-1e-9)) {
		return Invalid("annulus: got radii of %g and %g um and a slant of %g um, want all above 0 and a slant of at least the difference of the radii", a.InnerUM, a.OuterUM, a.SlantUM)
	}
	return nil
}

// At returns how far out on the ring a radius lies, 0 to 1, and the part's radius there.
func (a Annulus) At(radiusPx float64) (t, radiusUM float64) {
	t = (radiusPx - a.InnerPx) / (a.OuterPx - a.InnerPx)
	return t, a.InnerUM + t*(a.OuterUM-a.InnerUM)
}

// annulusTolerance is by how much the scale around the middle of a ring may differ from the
// view's stated one, either way: heights of a part lie at other distances from the camera.
const annulusTolerance = 1.5

// Agrees refuses a ring whose scale around its middle is not that of the view's geometry,
// by more than perspective explains: a part stated too small would make every defect on it
// too small. nil agrees with everything.
func (a Annulus) Agrees(view Geometry) error {
	if view == nil {
		return nil
	}
	around := a.ScaleAround(a.MiddlePx())
	_, _, stated := view.ToStation(a.CentreX+a.MiddlePx(), a.CentreY)
	if !(around < annulusTolerance*stated && stated < annulusTolerance*around) {
		return Invalid("the ring's diameters give %.4g um of arc per px at its middle, the view's um_per_px is %.4g; want them within a factor of %g", around, stated, annulusTolerance)
	}
	return nil
}

// MiddlePx is the radius of the middle of the ring.
func (a Annulus) MiddlePx() float64 { return (a.InnerPx + a.OuterPx) / 2 }

// ScaleAround returns the µm of arc that a pixel covers at a radius: the scale of the
// camera at that height of the part.
func (a Annulus) ScaleAround(radiusPx float64) float64 {
	_, radius := a.At(radiusPx)
	return radius / radiusPx
}

// ToStation implements Geometry. The scale is that of areas: √(along · across). Beside the
// ring there is no surface, and the scale is that of the ring's middle.
func (a Annulus) ToStation(x, y float64) (u, v, umPerPx float64) {
	r := math.Hypot(x-a.CentreX, y-a.CentreY)
	t, radius := a.At(r)
	on := r
	if r < a.InnerPx || r > a.OuterPx {
		on = a.MiddlePx()
	}
	return radius * math.Atan2(y-a.CentreY, x-a.CentreX), (t - 0.5) * a.SlantUM, math.Sqrt(a.ScaleAround(on) * a.SlantUM / (a.OuterPx - a.InnerPx))
}

// ToPixel implements Geometry.
func (a Annulus) ToPixel(u, v float64) (x, y float64) {
	t := v/a.SlantUM + 0.5
	r := a.InnerPx + t*(a.OuterPx-a.InnerPx)
	s, c := math.Sincos(u / (a.InnerUM + t*(a.OuterUM-a.InnerUM)))
	return a.CentreX + r*c, a.CentreY + r*s
}

// WithOrigin implements Geometry: the ring's centre moves.
func (a Annulus) WithOrigin(x, y float64) Geometry {
	a.CentreX, a.CentreY = x, y
	return a
}

// AreaMM2 returns the area of the surface: the frustum's π·(R₁ + R₂)·slant.
func (a Annulus) AreaMM2() float64 { return math.Pi * (a.InnerUM + a.OuterUM) * a.SlantUM / 1e6 }
