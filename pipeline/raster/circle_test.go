package raster

import (
	"math"
	"math/rand/v2"
	"testing"
)

// drawCircle returns a blurred round part on dark ground, with noise and clutter.
func drawCircle(c Circle, blur, step, sigma float64, seed uint64) *Plane {
	p := noisy(480, 400, 10, sigma, seed)
	for i := range p.Pix {
		d := math.Hypot(float64(i%480)-c.X, float64(i/480)-c.Y) - c.R
		p.Pix[i] += float32(step / 2 * math.Erfc(d/(blur*math.Sqrt2)))
	}
	for y := 180; y < 230; y++ {
		for x := 440; x < 470; x++ {
			p.Pix[y*480+x] += 200
		}
	}
	return p
}

func TestFindCircleToAFractionOfAPixel(t *testing.T) {
	want := Circle{231.37, 195.81, 162.45}
	for _, dark := range []bool{false, true} {
		for _, blur := range []float64{0.8, 2.0} {
			step := 20.
			if dark {
				step = -8
			}
			p := drawCircle(want, blur, step, 1, 3)
			s := CircleSearch{X: 240, Y: 200, Reach: 40, RMin: 150, RMax: 175, DarkInside: dark}
			fit, err := FindCircle(p, s)
			if err != nil {
				t.Fatal(err)
			}
			if limit := 0.06 * blur / 0.8; math.Hypot(fit.X-want.X, fit.Y-want.Y) > limit || math.Abs(fit.R-want.R) > limit || fit.Points < 300 {
				t.Errorf("dark %v blur %g: found %+v, want %+v", dark, blur, fit, want)
			}
			// 10–90 % width of a Gaussian edge: 2·1.28155 sigma.
			if w := 2 * 1.28155 * blur; math.Abs(fit.EdgeWidth-w) > 0.25*w+0.3 {
				t.Errorf("dark %v: edge width %.2f px, want %.2f", dark, fit.EdgeWidth, w)
			}
		}
	}
}

func TestNoCircleIsAnError(t *testing.T) {
	s := CircleSearch{X: 240, Y: 200, Reach: 40, RMin: 150, RMax: 175}
	for name, p := range map[string]*Plane{"zero": NewPlane(480, 400), "noise": noisy(480, 400, 10, 1, 1), "one pixel": NewPlane(1, 1), "square": squarePart()} {
		if fit, err := FindCircle(p, s); err == nil {
			t.Errorf("%s: found %+v", name, fit)
		}
	}
}

func squarePart() *Plane {
	p := noisy(480, 400, 10, 1, 1)
	for y := 60; y < 340; y++ {
		for x := 100; x < 380; x++ {
			p.Pix[y*480+x] += 30
		}
	}
	return p
}

func TestFitCircleWithPointsAstray(t *testing.T) {
	random := rand.New(rand.NewPCG(5, 5))
	want := Circle{100.25, -40.5, 77.3}
	var points []Point
	for k := range 300 {
		sin, cos := math.Sincos(float64(k) * 2 * math.Pi / 300)
		r := want.R + 0.1*random.NormFloat64()
		if k%3 == 0 {
			r += 4 + 6*random.Float64()
		}
		points = append(points, Point{want.X + r*cos, want.Y + r*sin})
	}
	c, used, rms, ok := FitCircle(points)
	if !ok || math.Hypot(c.X-want.X, c.Y-want.Y) > 0.04 || math.Abs(c.R-want.R) > 0.03 || len(used) < 190 || len(used) > 205 || math.Abs(rms-0.1) > 0.02 {
		t.Errorf("got %+v, %d points, rms %.3f", c, len(used), rms)
	}
	if _, _, _, ok := FitCircle([]Point{{0, 0}, {1, 1}, {2, 2}, {3, 3}}); ok {
		t.Error("a circle through points in line")
	}
}
