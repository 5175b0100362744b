package render

import (
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func backLight(t *testing.T, notch Notch, angleDeg float64) (*raster.Plane, Unit) {
	t.Helper()
	s := bare()
	s.Part.Notch = notch
	r := newRenderer(t, s)
	u := r.Unit(0)
	u.Stand(angleDeg)
	light, err := r.Light(&u, "back")
	if err != nil {
		t.Fatal(err)
	}
	return light, u
}

// The notch takes a half ellipse out of the silhouette, π/4·depth·width but for the sagitta
// of the edge, and its middle is where the part's +u axis points.
func TestNotchInTheSilhouette(t *testing.T) {
	for _, angle := range []float64{0, 60, 200} {
		with, _ := backLight(t, Notch{DepthUM: 800, WidthUM: 1200}, angle)
		without, _ := backLight(t, Notch{}, angle)
		sum, x, y := 0., 0., 0.
		for i := range with.Pix {
			d := float64(with.Pix[i]-without.Pix[i]) / 3000
			sum, x, y = sum+d, x+d*float64(i%with.Width), y+d*float64(i/with.Width)
		}
		got := math.Atan2(-(y/sum-119.5), x/sum-149.5) * 180 / math.Pi
		if turn := math.Mod(got-angle+540, 360) - 180; math.Abs(turn) > 0.3 {
			t.Errorf("at %g°: got %g°", angle, got)
		}
		if want := math.Pi / 4 * 8 * 12; math.Abs(sum-want) > 0.08*want {
			t.Errorf("at %g°: area %g px², want about %g", angle, sum, want)
		}
	}
}

func TestWindowMovesWithThePattern(t *testing.T) {
	frame := func(spoilers ...Spoiler) raster.Raw {
		s := bare()
		s.Spoilers = spoilers
		r := newRenderer(t, s)
		u := r.Unit(0)
		f, err := r.Frame(&u, "ring")
		if err != nil {
			t.Fatal(err)
		}
		return f.Raw
	}
	a, err := frame().Plane()
	if err != nil {
		t.Fatal(err)
	}
	b, err := frame(Spoiler{Kind: SpoilShift, Value: 2}).Plane()
	if err != nil {
		t.Fatal(err)
	}
	for y := range a.Height {
		for x := range a.Width {
			if a.At(x, y) != b.At((x+2)%a.Width, y) {
				t.Fatalf("pixel (%d, %d) is not the one 2 px further left", x, y)
			}
		}
	}
}

func TestGrainHasItsRootMeanSquare(t *testing.T) {
	clean, grainy := spoiledLight(t, "", 0, "ring"), spoiledLight(t, SpoilGrain, 20, "ring")
	sum, n := 0., 0.
	for y := range clean.Height {
		for x := range clean.Width {
			if math.Hypot(float64(x)-149.5, float64(y)-119.5) < 90 {
				d := float64(grainy.At(x, y) - clean.At(x, y))
				sum, n = sum+d*d, n+1
			}
		}
	}
	near(t, "rms", math.Sqrt(sum/n), 20, 1)
}

// Add and Stand keep station and part coordinates together.
func TestAddedObjectTurnsWithThePart(t *testing.T) {
	_, u := backLight(t, Notch{}, 30)
	u.Add(Object{Kind: pipeline.Dig, UUM: 1000, DiameterUM: 100, BrightnessDN: 50})
	u.Stand(120)
	o := u.Objects[len(u.Objects)-1]
	near(t, "u", o.UUM, 0, 1e-9)
	near(t, "v", o.VUM, 1000, 1e-9)
}
