package pipeline

import "math"

// Distortion is the radial distortion of a lens (Brown 1971, radial terms only). A point
// that an ideal lens would show at c + d, d in px, is seen at c + d·f with
//
//	f = 1 + K1·ρ² + K2·ρ⁴,  ρ = |d| / NormPx
//
// K1 < 0 is a barrel, K1 > 0 a pincushion.
type Distortion struct {
	K1      float64 `json:"k1"`
	K2      float64 `json:"k2"`
	CentreX float64 `json:"centre_x_px"`
	CentreY float64 `json:"centre_y_px"`
	NormPx  float64 `json:"norm_px"` // the radius at which ρ is 1
}

// Check refuses a distortion that folds the picture over within radiusPx of its centre:
// there the seen radius must grow with the ideal one, with at least a tenth of its pace.
func (l Distortion) Check(radiusPx float64) error {
	if !finite(l.K1, l.K2, l.CentreX, l.CentreY, radiusPx) || !(l.NormPx > 0) {
		return Invalid("distortion: got %+v, want finite numbers and a norm above 0", l)
	}
	const steps = 64
	for i := range steps + 1 {
		rho := 1.3 * radiusPx / l.NormPx * float64(i) / steps
		if f, g := l.factors(rho); f < 0.1 || g < 0.1 {
			return Invalid("distortion: k1 %g and k2 %g fold the picture over at %.0f px from its centre, want a map that can be undone", l.K1, l.K2, rho*l.NormPx)
		}
	}
	return nil
}

// factors returns how much lengths across and along the radius are stretched at ρ.
func (l Distortion) factors(rho float64) (across, along float64) {
	r2 := rho * rho
	return 1 + r2*(l.K1+r2*l.K2), 1 + r2*(3*l.K1+5*r2*l.K2)
}

// Seen returns where the lens shows the point that an ideal one would show at (x, y).
func (l Distortion) Seen(x, y float64) (float64, float64) {
	dx, dy := x-l.CentreX, y-l.CentreY
	f, _ := l.factors(math.Hypot(dx, dy) / l.NormPx)
	return l.CentreX + f*dx, l.CentreY + f*dy
}

// Ideal is the inverse of Seen, by Newton's method along the radius.
func (l Distortion) Ideal(x, y float64) (float64, float64) {
	dx, dy := x-l.CentreX, y-l.CentreY
	seen := math.Hypot(dx, dy) / l.NormPx
	rho := seen
	for range 20 {
		f, g := l.factors(rho)
		step := (rho*f - seen) / g
		rho -= step
		if math.Abs(step) < 1e-13 {
			break
		}
	}
	f, _ := l.factors(rho)
	return l.CentreX + dx/f, l.CentreY + dy/f
}

// Distorted is a Planar part seen through a lens with radial distortion. The Planar's
// pixels are those of the ideal lens; at the distortion's centre the scales agree.
type Distorted struct {
	Planar Planar
	Lens   Distortion
}

// ToStation implements Geometry. The local scale is that of areas: the square root of the
// area that a pixel covers.
func (d Distorted) ToStation(x, y float64) (float64, float64, float64) {
	ix, iy := d.Lens.Ideal(x, y)
	u, v, scale := d.Planar.ToStation(ix, iy)
	f, g := d.Lens.factors(math.Hypot(ix-d.Lens.CentreX, iy-d.Lens.CentreY) / d.Lens.NormPx)
	return u, v, scale / math.Sqrt(f*g)
}

// ToPixel implements Geometry.
func (d Distorted) ToPixel(u, v float64) (float64, float64) {
	return d.Lens.Seen(d.Planar.ToPixel(u, v))
}

// WithOrigin implements Geometry.
func (d Distorted) WithOrigin(x, y float64) Geometry {
	d.Planar.OriginX, d.Planar.OriginY = d.Lens.Ideal(x, y)
	return d
}
