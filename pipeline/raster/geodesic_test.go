package raster

import (
	"math"
	"testing"
)

// The contour of a cone cut at half its height is 2π times half its radius.
func TestContourLengthOfACone(t *testing.T) {
	const r = 20.
	w := &window{width: 61, height: 61, smooth: make([]float32, 61*61)}
	for i := range w.smooth {
		w.smooth[i] = float32(max(100*(1-math.Hypot(float64(i%61)-30.3, float64(i/61)-29.6)/r), 0))
	}
	if got, want := w.contourLength(50), 2*math.Pi*r/2; math.Abs(got-want) > 0.005*want {
		t.Errorf("contour %.3f px, want %.3f", got, want)
	}
}

// Two opposite corners above and two below: the contour cuts off both, 2 × √(½² + ½²).
func TestContourOfASaddle(t *testing.T) {
	for _, c := range [][4]float32{{10, 0, 10, 0}, {0, 10, 0, 10}} {
		if got := squareContour(c, 5); math.Abs(got-math.Sqrt2) > 1e-6 {
			t.Errorf("%v: %.6f, want √2", c, got)
		}
	}
}

func TestGeodesicOfARectangle(t *testing.T) {
	length, width, ok := geodesic(60, 2*(30+2))
	if !ok || math.Abs(length-30) > 1e-9 || math.Abs(width-2) > 1e-9 {
		t.Errorf("30 × 2: got %g × %g (%v)", length, width, ok)
	}
	if _, _, ok := geodesic(math.Pi*100, 2*math.Pi*10); ok {
		t.Error("a disc is no thin region")
	}
}

// stroke draws a line of the width given through the points of f(0…1), under a Gaussian
// of 1 px, as the distance to the nearest of many points of it.
func stroke(p *Plane, width, height float64, f func(u float64) (x, y float64)) {
	var course []Point
	for k := range 2001 {
		x, y := f(float64(k) / 2000)
		course = append(course, Point{x, y})
	}
	for y := range p.Height {
		for x := range p.Width {
			d := math.Inf(1)
			for _, c := range course {
				d = min(d, math.Hypot(float64(x)-c.X, float64(y)-c.Y))
			}
			p.Pix[y*p.Stride+x] += float32(height * box(d, width, 1))
		}
	}
}

// A fibre that coils is as thick as it is drawn and as long as its course, however
// compact the figure that it makes. A box of 3 px under a Gaussian of 1 px is 3.33 px
// wide at half of its height (from erf).
func TestCoiledFibre(t *testing.T) {
	cases := map[string]struct {
		length float64
		f      func(u float64) (x, y float64)
	}{
		"half circle": {math.Pi * 24, func(u float64) (float64, float64) {
			return 80 + 24*math.Cos(math.Pi*u), 80 + 24*math.Sin(math.Pi*u)
		}},
		"hook": {1.6 * math.Pi * 22, func(u float64) (float64, float64) {
			return 80 + 22*math.Cos(1.6*math.Pi*u), 80 + 22*math.Sin(1.6*math.Pi*u)
		}},
	}
	for name, tc := range cases {
		p := noisy(160, 160, 20, 1.6, 4)
		stroke(p, 3, 30, tc.f)
		found, _ := detect(p, fullMask(160, 160), nil, 3.5, 6)
		if len(found) != 1 {
			t.Fatalf("%s: %d blemishes, want 1", name, len(found))
		}
		if b := found[0]; !b.Coiled || math.Abs(b.Length-tc.length) > 0.1*tc.length || math.Abs(b.Width-3.33) > 0.5 {
			t.Errorf("%s: %.1f × %.2f px (coiled %v), want %.1f × 3.33", name, b.Length, b.Width, b.Coiled, tc.length)
		}
	}
}

// Two scratches that cross and scatter alike are no broad one.
func TestCrossedScratches(t *testing.T) {
	p := noisy(192, 192, 20, 1.6, 6)
	stroke(p, 3, 30, func(u float64) (float64, float64) { // one course, there and back over the other
		if u < 0.5 {
			return 40 + 220*u, 70 + 100*u
		}
		return 50 + 180*(u-0.5), 130 - 140*(u-0.5)
	})
	found, _ := detect(p, fullMask(192, 192), nil, 3.5, 6)
	length := math.Hypot(110, 50) + math.Hypot(90, 70)
	if len(found) != 1 || math.Abs(found[0].Width-3.33) > 0.7 || math.Abs(found[0].Length-length) > 0.1*length {
		t.Errorf("%+v, want one blemish about 3.3 px wide and %.0f px long", found, length)
	}
}
