package raster

import "math"

// Shape is area, centre and second moments of a set of points, in pixels. A full axis
// is 4√λ of the covariance, as of an ellipse of uniform weight.
type Shape struct {
	Area   float64 // px
	X, Y   float64 // centre of gravity, px
	Length float64 // long axis, 4√λ₁, px
	Width  float64 // short axis, 4√λ₂, px
	Angle  float64 // of the long axis, degrees from +x towards +y, −90 < angle <= 90
}

// Diameter returns that of the circle of equal area, √(4A/π).
func (s Shape) Diameter() float64 { return math.Sqrt(4 * s.Area / math.Pi) }

// sums are the raw moments ∫1, ∫x, ∫y, ∫x², ∫xy, ∫y².
type sums struct{ a, x, y, xx, xy, yy float64 }

// shape turns raw moments into a Shape; extra is added to both variances.
func (m sums) shape(extra float64) Shape {
	if m.a <= 0 {
		return Shape{}
	}
	x, y := m.x/m.a, m.y/m.a
	xx, yy, xy := m.xx/m.a-x*x+extra, m.yy/m.a-y*y+extra, m.xy/m.a-x*y
	half, diff := (xx+yy)/2, (xx-yy)/2
	root := math.Hypot(diff, xy)
	angle := math.Atan2(xy, diff) / 2 * 180 / math.Pi
	if angle <= -90 {
		angle += 180
	}
	return Shape{Area: m.a, X: x, Y: y, Angle: angle,
		Length: 4 * math.Sqrt(max(half+root, 0)), Width: 4 * math.Sqrt(max(half-root, 0))}
}

// ShapeOf returns the shape of the pixels in the spans, each a unit square: 1/12 is
// added to each variance of the pixel centres.
func ShapeOf(spans []Span) Shape {
	var m sums
	for _, s := range spans {
		n, y := float64(s.Len()), float64(s.Y)
		mid := float64(s.X0+s.X1-1) / 2
		m.a += n
		m.x += n * mid
		m.y += n * y
		m.xx += n*mid*mid + n*(n*n-1)/12
		m.xy += n * mid * y
		m.yy += n * y * y
	}
	return m.shape(1. / 12)
}

// addPolygon adds the moments of a simple polygon's interior (Green's theorem). Its
// corners must run from +x towards +y, which makes the area positive.
func (m *sums) addPolygon(p []Point) {
	for i, a := range p {
		b := p[(i+1)%len(p)]
		cross := a.X*b.Y - b.X*a.Y
		m.a += cross / 2
		m.x += cross * (a.X + b.X) / 6
		m.y += cross * (a.Y + b.Y) / 6
		m.xx += cross * (a.X*a.X + a.X*b.X + b.X*b.X) / 12
		m.yy += cross * (a.Y*a.Y + a.Y*b.Y + b.Y*b.Y) / 12
		m.xy += cross * (a.X*b.Y + 2*a.X*a.Y + 2*b.X*b.Y + b.X*a.Y) / 24
	}
}
