package render

import (
	"math"
	"testing"

	"lapgate/pipeline"
)

// A scratch under the bar light: floor + (1 − floor)·|cos|⁴ of its normal to the light,
// as the view's settings state it; the ring sees all directions alike.
func TestBarDirectionLaw(t *testing.T) {
	s := bare()
	s.Views[1].RotationDeg, s.Views[1].Mirror = 0, false
	r := newRenderer(t, s)
	peak := func(view string, angle float64) float64 {
		u := r.Unit(0)
		u.Objects = []Object{{Kind: pipeline.Scratch, LengthUM: 4000, WidthUM: 400, AngleDeg: angle, BrightnessDN: 300}}
		if _, err := r.Light(&u, view); err != nil {
			t.Fatal(err)
		}
		return u.Objects[0].Sightings[0].PeakDN
	}
	for angle := -80.0; angle <= 90; angle += 17 {
		cos := math.Cos((angle + 90 - 30) * math.Pi / 180)
		near(t, "ring", peak("ring", angle), peak("ring", 0), 0.03*300)
		near(t, "bar", peak("bar", angle)/peak("ring", angle), 0.1+0.9*math.Pow(cos, 4), 1e-4)
	}
}

// A sighting says what the object adds to the light, in a view that turns and mirrors too.
func TestSightingIsWhatIsDrawn(t *testing.T) {
	s := bare()
	for i := range s.Views {
		s.Views[i].Vignetting, s.Views[i].VignettingXPx, s.Views[i].StrayDN = 0.3, 20, 8
	}
	r := newRenderer(t, s)
	for _, view := range []string{"ring", "bar"} {
		u := r.Unit(0)
		u.LampPower = 1.3
		empty, err := r.Light(&u, view)
		if err != nil {
			t.Fatal(err)
		}
		u.Objects = []Object{{Kind: pipeline.Dig, UUM: 4000, VUM: 2000, DiameterUM: 700, BrightnessDN: 400}}
		full, _ := r.Light(&u, view)
		var sum, x, y, peak, under float64
		for i, v := range full.Pix {
			d := float64(v - empty.Pix[i])
			sum, x, y = sum+d, x+d*float64(i%full.Width), y+d*float64(i/full.Width)
			if d > peak {
				peak, under = d, float64(empty.Pix[i])
			}
		}
		got := u.Objects[0].Sightings[0]
		near(t, view+" x", x/sum, got.XPx, 0.02)
		near(t, view+" y", y/sum, got.YPx, 0.02)
		near(t, view+" peak", got.PeakDN, peak, 0.3)
		near(t, view+" background", got.BackgroundDN, under, 0.3)
		near(t, view+" flux", got.FluxDNPx, sum, 0.005*sum)
		near(t, view+" sigma", got.PeakSigma*math.Sqrt(0.5*under+9+1.0/12), peak, 0.6)
	}
}

// At its centre all light arrives, in the farthest corner 1 − vignetting; with the
// centre moved by (20, 0) that is a corner on the left.
func TestVignetting(t *testing.T) {
	s := bare()
	s.Camera.Width, s.Camera.Height = 301, 241
	s.Views[0].Vignetting, s.Views[0].VignettingXPx = 0.3, 20
	near(t, "centre", s.vignettingAt(s.Views[0], 170, 120), 1, 1e-12)
	near(t, "corner", s.vignettingAt(s.Views[0], 0, 240), 0.7, 1e-12)
	half := math.Hypot(170, 120) / 2
	near(t, "half way", s.vignettingAt(s.Views[0], 170-half, 120), 1-0.3/4, 1e-12)
}

func TestReferencePatchFollowsTheLamp(t *testing.T) {
	s := bare()
	s.Spoilers = []Spoiler{{Unit: 1, Kind: SpoilLamp, Value: 0.3}, {Unit: 2, Kind: SpoilCap}, {Unit: 3, Kind: SpoilEmptyNest}}
	r := newRenderer(t, s)
	for i, want := range []float64{800, 240, 0, 800} {
		u := r.Unit(i)
		f, err := r.Frame(&u, "ring")
		if err != nil {
			t.Fatal(err)
		}
		plane, _ := f.Raw.Plane()
		near(t, "patch", meanOf(plane, 6, 22, 6, 22)-50, want, 6)
		onPart := meanOf(plane, 120, 180, 100, 140) - 50
		near(t, "part", onPart, []float64{100, 30, 0, 10}[i], 1.5)
	}
}
