package dots

import (
	"math"
	"testing"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
)

const umPerPx = 23.5

// scene is a camera of 800 × 600 pixels with noise, blur and an even light.
func scene(seed uint64) render.Scene {
	return render.Scene{Seed: seed, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 1, UnitsPerLot: 1, SerialPattern: "D%d", LotPattern: "L%d",
		Part:   render.Part{Number: "disc", DiameterMM: 10, ClearApertureMM: 9},
		Camera: render.Camera{ID: "c", Width: 800, Height: 600, UMPerPx: umPerPx, PixelFormat: "Mono12", BlackLevelDN: 50, GainDNPerE: 0.25, DarkNoiseE: 8, BlurPx: 0.9},
		Lamp:   render.Lamp{MinPower: 1, MaxPower: 1}, Views: []render.View{{Name: "ring", Light: render.LightRing}},
		Lines:     []render.Line{{Name: "A", Station: "A1"}},
		Processes: []render.Process{{Name: "p", Share: 1, HazeDN: render.Distribution{Value: 10}}}}
}

func shoot(t *testing.T, seed uint64, target render.Target, n int) (*raster.Plane, []render.TargetDot) {
	t.Helper()
	r, err := render.New(scene(seed))
	if err != nil {
		t.Fatal(err)
	}
	f, truth, err := r.TargetFrame("ring", target, n)
	if err != nil {
		t.Fatal(err)
	}
	p, err := f.Raw.Plane()
	if err != nil {
		t.Fatal(err)
	}
	for i := range p.Pix {
		p.Pix[i] -= 50
	}
	return p, truth
}

// plate has dots of 14 px, 40 px apart, over the whole field.
func plate() render.Target {
	return render.Target{PitchUM: 40 * umPerPx, Columns: 21, Rows: 17, DiametersUM: []float64{14 * umPerPx}, BackgroundDN: 60, BrightnessDN: 1500}
}

func fitted(t *testing.T, certificate Certificate, planes ...*raster.Plane) Scale {
	t.Helper()
	var frames [][]Placed
	for _, p := range planes {
		placed, err := Assign(Find(p, nil, nil, GridThresholds()))
		if err != nil {
			t.Fatal(err)
		}
		frames = append(frames, placed)
	}
	s, err := FitScale(frames, certificate, 800, 600)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func exact() Certificate {
	return Certificate{Serial: "T-1", Date: "2024-01-01", PitchUM: 40 * umPerPx}
}

// Dots, bright or dark, lie where the truth says to some hundredths of a pixel.
func TestDotsAreFound(t *testing.T) {
	for name, brightness := range map[string]float64{"bright": 1500, "dark": -1200} {
		target := plate()
		target.BrightnessDN, target.BackgroundDN = brightness, 1600
		p, truth := shoot(t, 1, target, 0)
		found := Find(p, nil, nil, GridThresholds())
		inside := 0
		for _, d := range truth {
			if d.XPx < 12 || d.YPx < 12 || d.XPx > 787 || d.YPx > 587 {
				continue
			}
			inside++
			at := nearestTo(found, d.XPx, d.YPx)
			if away := math.Hypot(found[at].X-d.XPx, found[at].Y-d.YPx); away > 0.08 {
				t.Errorf("%s dot at (%.2f, %.2f) found %.3f px away", name, d.XPx, d.YPx, away)
			}
		}
		if len(found) < inside || inside < 250 {
			t.Errorf("%s: %d found, %d inside", name, len(found), inside)
		}
	}
}

// A barrel with its centre off the middle, the target laid down twice, turned by 3° and by 5°:
// the map takes every seen place to where an ideal lens would show it, to 0.05 px, and the
// true scale is within three standard uncertainties.
func TestScaleAndDistortion(t *testing.T) {
	target := plate()
	target.RotationDeg, target.K1, target.K2, target.LensXPx, target.LensYPx = -3, -0.02, 0.004, 6.5, -3.5
	lens := target.Lens(scene(1).Camera)
	a, _ := shoot(t, 1, target, 0)
	b, _ := shoot(t, 1, target, 4)
	s := fitted(t, exact(), a, b)
	t.Logf("%.5f ± %.5f µm/px, %+v ± %.4f, %.4f, rms %.4f (plain %.3f), %s", s.UMPerPx, s.UncertaintyUM, *s.Distortion, s.K1Uncertainty, s.K2Uncertainty, s.RMSPx, s.PlainRMSPx, s.Method)
	if math.Abs(s.UMPerPx-umPerPx) > 3*s.UncertaintyUM || s.UncertaintyUM > 2e-4*umPerPx {
		t.Errorf("scale %v ± %v, want %v", s.UMPerPx, s.UncertaintyUM, umPerPx)
	}
	for _, p := range [][2]float64{{30, 30}, {770, 570}, {400, 30}, {770, 300}, {400, 300}} {
		x, y := lens.Ideal(p[0], p[1])
		u, v := s.Distortion.Ideal(p[0], p[1])
		if math.Hypot(u-x, v-y) > 0.05 {
			t.Errorf("(%v, %v) maps to (%.3f, %.3f), want (%.3f, %.3f)", p[0], p[1], u, v, x, y)
		}
	}
	if s.RMSPx > 0.03 || s.PlainRMSPx < 10*s.RMSPx || s.Frames != 2 || s.FieldShare < 0.8 {
		t.Errorf("rms %v px (plain %v), %d frames, share %v", s.RMSPx, s.PlainRMSPx, s.Frames, s.FieldShare)
	}
	for i, want := range []float64{-3, 5} {
		if math.Abs(s.RotationDeg[i]-want) > 0.01 {
			t.Errorf("rotation %v°, want %v", s.RotationDeg[i], want)
		}
	}
}

// A lens without distortion gets no map, and the certificate's uncertainty is in the sum.
func TestNoDistortionIsInvented(t *testing.T) {
	for seed := range uint64(3) {
		p, _ := shoot(t, seed+1, plate(), 0)
		c := exact()
		c.UncertaintyUM = 1e-3 * c.PitchUM
		s := fitted(t, c, p)
		if s.Distortion != nil {
			t.Errorf("seed %d: %+v out of nothing", seed, *s.Distortion)
		}
		if math.Abs(s.UMPerPx-umPerPx) > 3*s.FitUncertaintyUM || math.Abs(s.CertificateUncertaintyUM-0.0235) > 1e-5 ||
			math.Abs(s.UncertaintyUM-math.Hypot(s.FitUncertaintyUM, s.CertificateUncertaintyUM)) > 1e-12 {
			t.Errorf("seed %d: %v ± %v (fit %v)", seed, s.UMPerPx, s.UncertaintyUM, s.FitUncertaintyUM)
		}
	}
}

// A dot out of place is left out and moves nothing.
func TestDotOutOfPlaceIsLeftOut(t *testing.T) {
	p, _ := shoot(t, 1, plate(), 0)
	placed, err := Assign(Find(p, nil, nil, GridThresholds()))
	if err != nil {
		t.Fatal(err)
	}
	placed[7].X += 1.5
	s, err := FitScale([][]Placed{placed}, exact(), 800, 600)
	if err != nil || s.LeftOut != 1 || math.Abs(s.UMPerPx-umPerPx) > 3*s.FitUncertaintyUM {
		t.Errorf("%d left out, scale %v ± %v, %v", s.LeftOut, s.UMPerPx, s.FitUncertaintyUM, err)
	}
}

func TestTooFewDotsAreRefused(t *testing.T) {
	target := plate()
	target.Columns, target.Rows = 3, 3
	p, _ := shoot(t, 1, target, 0)
	if _, err := Assign(Find(p, nil, nil, GridThresholds())); err == nil {
		t.Error("nine dots are no grid")
	}
	var scattered []Dot
	for i := range 40 {
		scattered = append(scattered, Dot{X: math.Mod(float64(i*i)*37.7, 800), Y: math.Mod(float64(i)*91.3, 600)})
	}
	if placed, err := Assign(scattered); err == nil {
		t.Errorf("%d scattered dots are no grid", len(placed))
	}
}
