package raster

import (
	"math"
	"testing"
)

// spansWhere returns the pixels of a 120 × 120 frame for which in holds at their centre,
// with the origin at its middle pixel.
func spansWhere(in func(x, y float64) bool) []Span {
	m := NewMask(121, 121)
	for i := range m.Bits {
		m.Bits[i] = in(float64(i%121-60), float64(i/121-60))
	}
	return m.Spans()
}

// Areas, diameters of equal area, and 4√λ axes with 1/12 added: worked out from the
// definitions (rectangle: 4w/√12); pixel counts of discs are the Gauss circle problem's.
func TestShapeOfKnownForms(t *testing.T) {
	circle := func(r float64) []Span { return spansWhere(func(x, y float64) bool { return x*x+y*y <= r*r }) }
	ellipse := spansWhere(func(x, y float64) bool {
		sin, cos := math.Sincos(30 * math.Pi / 180)
		a, b := (x*cos+y*sin)/40, (y*cos-x*sin)/15
		return a*a+b*b <= 1
	})
	rectangle := spansWhere(func(x, y float64) bool { return x >= -15 && x < 15 && y >= -5 && y < 5 })
	cases := []struct {
		name                          string
		spans                         []Span
		area, diameter, length, width float64
	}{
		{"disc 20", circle(20), 1257, 40.00578, 40.02557, 40.02557},
		{"disc 5", circle(5), 81, math.Sqrt(4 * 81 / math.Pi), 0, 0},
		{"disc 10", circle(10), 317, math.Sqrt(4 * 317 / math.Pi), 0, 0},
		{"disc 50", circle(50), 7845, math.Sqrt(4 * 7845 / math.Pi), 0, 0},
		{"rectangle 30 × 10", rectangle, 300, 19.544100, 34.641016, 11.547005},
		{"ellipse 40, 15 at 30°", ellipse, 1879, math.Sqrt(4 * 1879 / math.Pi), 79.9753, 29.9386},
	}
	for _, c := range cases {
		s := ShapeOf(c.spans)
		if s.Area != c.area || math.Abs(s.Diameter()-c.diameter) > 1e-5 {
			t.Errorf("%s: area %g, diameter %.6f, want %g, %.6f", c.name, s.Area, s.Diameter(), c.area, c.diameter)
		}
		if c.length > 0 && (math.Abs(s.Length-c.length) > 1e-4 || math.Abs(s.Width-c.width) > 1e-4) {
			t.Errorf("%s: axes %.6f × %.6f, want %.6f × %.6f", c.name, s.Length, s.Width, c.length, c.width)
		}
	}
	if s := ShapeOf(ellipse); math.Abs(s.Angle-29.793) > 0.001 {
		t.Errorf("ellipse: angle %.4f°, want 29.793°", s.Angle)
	}
}

func TestShapeOfOnePixel(t *testing.T) {
	s := ShapeOf([]Span{{Y: 4, X0: 7, X1: 8}})
	if s.Area != 1 || s.X != 7 || s.Y != 4 || math.Abs(s.Length-4/math.Sqrt(12)) > 1e-12 {
		t.Errorf("got %+v", s)
	}
}

func TestAngleRange(t *testing.T) {
	upright := ShapeOf([]Span{{0, 3, 4}, {1, 3, 4}, {2, 3, 4}})
	rising := ShapeOf([]Span{{0, 2, 3}, {1, 1, 2}, {2, 0, 1}})
	if upright.Angle != 90 || math.Abs(rising.Angle+45) > 1e-9 {
		t.Errorf("upright %g°, rising to the right %g°, want 90 and −45", upright.Angle, rising.Angle)
	}
}

// The moments of the contour polygon are those of the figure: a 3 × 2 rectangle.
func TestPolygonMoments(t *testing.T) {
	var m sums
	m.addPolygon([]Point{{1, 1}, {4, 1}, {4, 3}, {1, 3}})
	s := m.shape(0)
	if math.Abs(s.Area-6) > 1e-12 || math.Abs(s.X-2.5) > 1e-12 || math.Abs(s.Y-2) > 1e-12 ||
		math.Abs(s.Length-12/math.Sqrt(12)) > 1e-12 || math.Abs(s.Width-8/math.Sqrt(12)) > 1e-12 {
		t.Errorf("got %+v", s)
	}
}

// A cone cut at half its height is a circle of half its radius.
func TestContourAreaOfACone(t *testing.T) {
	const r = 20.
	w := &window{width: 61, height: 61, smooth: make([]float32, 61*61)}
	for i := range w.smooth {
		d := math.Hypot(float64(i%61)-30.3, float64(i/61)-29.6)
		w.smooth[i] = float32(max(100*(1-d/r), 0))
	}
	s := w.above(50).shape(0)
	if math.Abs(s.Diameter()-r) > 0.03 || math.Abs(s.X-30.3) > 0.01 || math.Abs(s.Y-29.6) > 0.01 {
		t.Errorf("diameter %.3f at (%.3f, %.3f), want 20 at (30.3, 29.6)", s.Diameter(), s.X, s.Y)
	}
}
