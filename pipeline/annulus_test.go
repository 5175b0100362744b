package pipeline_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline"
)

// bore is 20 mm across and 10 mm deep, between 150 and 350 px from its middle; cone widens
// from 20 to 26 mm over 4 mm.
var (
	bore = pipeline.Annulus{CentreX: 399.5, CentreY: 399.5, InnerPx: 150, OuterPx: 350, InnerUM: 10_000, OuterUM: 10_000, SlantUM: 10_000}
	cone = pipeline.Annulus{CentreX: 100, CentreY: 100, InnerPx: 150, OuterPx: 350, InnerUM: 10_000, OuterUM: 13_000, SlantUM: 5_000}
)

func within(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %g, want %g ± %g", what, got, want, tolerance)
	}
}

// Cylinder of radius R: a quarter turn is πR/2 of arc, the area 2πR·h; frustum of radii
// R₁ and R₂: slant √(h² + (R₂−R₁)²), area π(R₁+R₂)·slant. Textbook mensuration.
func TestAnnulusInClosedForm(t *testing.T) {
	u, v, _ := bore.ToStation(399.5, 399.5+250)
	within(t, "arc of a quarter turn", u, math.Pi/2*10_000, 1e-6)
	within(t, "middle height", v, 0, 1e-6)
	within(t, "area of the cylinder", bore.AreaMM2(), 2*math.Pi*10*10, 1e-9)
	within(t, "area of the frustum", cone.AreaMM2(), math.Pi*23*5, 1e-9)
	_, v, _ = cone.ToStation(100+350, 100)
	within(t, "outer edge", v, 2500, 1e-9)
	_, _, middle := bore.ToStation(399.5+250, 399.5)
	_, _, beside := bore.ToStation(399.5, 399.5)
	within(t, "scale of the middle, √(40 · 50)", middle, math.Sqrt(2000), 1e-9)
	within(t, "scale beside the ring", beside, middle, 0)
}

// ToPixel is the inverse of ToStation, and the square of the scale is the surface that a
// pixel covers: the Jacobian of the map, here by differences, for the cylinder.
func TestAnnulusThereAndBack(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for _, a := range []pipeline.Annulus{bore, cone} {
		for range 200 {
			r, angle := 155+190*random.Float64(), 2*math.Pi*random.Float64()-math.Pi
			x, y := a.CentreX+r*math.Cos(angle), a.CentreY+r*math.Sin(angle)
			u, v, scale := a.ToStation(x, y)
			bx, by := a.ToPixel(u, v)
			within(t, "x", bx, x, 1e-9)
			within(t, "y", by, y, 1e-9)
			if a == bore && math.Abs(angle) < 3 {
				const h = 1e-4
				ux, vx, _ := a.ToStation(x+h, y)
				uy, vy, _ := a.ToStation(x, y+h)
				within(t, "scale²", math.Abs((ux-u)*(vy-v)-(vx-v)*(uy-u))/(h*h), scale*scale, 1e-2*scale*scale)
			}
		}
	}
	moved := bore.WithOrigin(10, 20).(pipeline.Annulus)
	if moved.CentreX != 10 || moved.CentreY != 20 || moved.InnerPx != 150 {
		t.Errorf("got %+v", moved)
	}
}

func TestAnnulusThatCannotBe(t *testing.T) {
	for name, change := range map[string]func(*pipeline.Annulus){
		"no width":      func(a *pipeline.Annulus) { a.OuterPx = 150 },
		"no hole":       func(a *pipeline.Annulus) { a.InnerPx = 0 },
		"no number":     func(a *pipeline.Annulus) { a.OuterUM = math.NaN() },
		"no part":       func(a *pipeline.Annulus) { a.InnerUM = 0 },
		"slant too low": func(a *pipeline.Annulus) { a.InnerUM, a.SlantUM = 1, 10 },
	} {
		a := bore
		change(&a)
		if a.Check() == nil {
			t.Errorf("%s: no error", name)
		}
	}
	if err := bore.Check(); err != nil {
		t.Error(err)
	}
	if bore.Agrees(nil) != nil || bore.Agrees(pipeline.Planar{UMPerPx: 40}) != nil || bore.Agrees(pipeline.Planar{UMPerPx: 61}) == nil || bore.Agrees(pipeline.Planar{UMPerPx: 26}) == nil {
		t.Error("a ring of 40 um of arc per px agrees with 27 to 60 um/px, and with no others")
	}
}
