package pipeline_test

import (
	"context"
	"math"
	"testing"

	"lapgate/pipeline"
)

var barrel = pipeline.Distortion{K1: -0.03, K2: 0.004, CentreX: 801, CentreY: 597, NormPx: 1000}

// The radial model by hand: at ρ = 0.5, f = 1 − 0.03·0.25 + 0.004·0.0625 = 0.99275.
func TestDistortionByHand(t *testing.T) {
	if x, y := barrel.Seen(801+300, 597+400); math.Abs(x-(801+0.99275*300)) > 1e-9 || math.Abs(y-(597+0.99275*400)) > 1e-9 {
		t.Errorf("got (%v, %v)", x, y)
	}
}

func TestDistortedGoesBackAndForth(t *testing.T) {
	g := pipeline.Distorted{Planar: pipeline.Planar{UMPerPx: 12, RotationDeg: 30, Mirror: true}, Lens: barrel}.WithOrigin(700, 500)
	if u, v, _ := g.ToStation(700, 500); math.Abs(u)+math.Abs(v) > 1e-8 {
		t.Errorf("the origin is at (%v, %v)", u, v)
	}
	for _, p := range [][2]float64{{0, 0}, {1599, 3}, {801, 597}, {120, 1190}} {
		u, v, _ := g.ToStation(p[0], p[1])
		if x, y := g.ToPixel(u, v); math.Hypot(x-p[0], y-p[1]) > 1e-8 {
			t.Errorf("(%v, %v) comes back as (%v, %v)", p[0], p[1], x, y)
		}
	}
}

// The local scale squared is the area that a pixel covers, by differences.
func TestDistortedScaleIsThatOfAreas(t *testing.T) {
	g := pipeline.Distorted{Planar: pipeline.Planar{UMPerPx: 12}, Lens: barrel}
	const h = 1e-3
	for _, p := range [][2]float64{{801, 597}, {100, 90}, {1500, 700}} {
		_, _, scale := g.ToStation(p[0], p[1])
		a, b, _ := g.ToStation(p[0]-h, p[1])
		c, d, _ := g.ToStation(p[0]+h, p[1])
		e, f, _ := g.ToStation(p[0], p[1]-h)
		k, l, _ := g.ToStation(p[0], p[1]+h)
		area := math.Abs((c-a)*(l-f)-(k-e)*(d-b)) / (4 * h * h)
		if math.Abs(scale*scale/area-1) > 1e-6 {
			t.Errorf("at (%v, %v): scale² %v, a pixel covers %v µm²", p[0], p[1], scale*scale, area)
		}
	}
}

func TestDistortionThatFoldsIsRefused(t *testing.T) {
	if err := barrel.Check(1000); err != nil {
		t.Error(err)
	}
	folding := barrel
	folding.K1 = -0.4
	if err := folding.Check(1000); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v", err)
	}
}

func TestSizingUndoesItsLaw(t *testing.T) {
	s := pipeline.Sizing{Exponent: 1.4, ExponentUncertainty: 0.07, FluxDNPx: 500, ReferenceUM: 20, MinUM: 5, MaxUM: 60, Residual: 0.1}
	d, u, ok := s.DiameterUM(500*math.Pow(35./20, 1.4), 50)
	// 35 µm; 10 % residual, 1/(50·1.4) of noise, ln(35/20)·0.07/1.4 of the exponent.
	want := 35 * math.Sqrt(0.01+math.Pow(1/70., 2)+math.Pow(math.Log(1.75)*0.05, 2))
	if !ok || math.Abs(d-35) > 1e-9 || math.Abs(u-want) > 1e-9 {
		t.Errorf("got %v ± %v, %v, want 35 ± %v", d, u, ok, want)
	}
	for _, flux := range []float64{0, -3, math.NaN(), 500 * math.Pow(4.4/20, 1.4), 500 * math.Pow(67./20, 1.4)} {
		if _, _, ok := s.DiameterUM(flux, 50); ok {
			t.Errorf("flux %v: sized beyond what is known", flux)
		}
	}
}

// A recipe built with a calibration that has a map and a scale sees through both.
func TestBuildTakesTheCalibrationsMap(t *testing.T) {
	var seen pipeline.Geometry
	look := failing("look", func(_ context.Context, i *pipeline.Item) error { seen = i.Geometry; return nil })
	r := recipe("look")
	r.Views[0].NoCalibration, r.Views[0].UMPerPx = false, 0
	cal := &pipeline.Calibration{Hash: "sha256:x", Scale: pipeline.Scale{UMPerPx: 12}, Distortion: &barrel}
	cat := catalogue(t, nil, look)
	p, err := pipeline.Build(r, cat, pipeline.Options{Calibrations: map[string]*pipeline.Calibration{"ring": cal}})
	if err != nil {
		t.Fatal(err)
	}
	p.RunView(context.Background(), pipeline.Identity{}, pipeline.View{Name: "ring"})
	if d, ok := seen.(pipeline.Distorted); !ok || d.Lens != barrel || d.Planar.UMPerPx != 12 {
		t.Errorf("got %+v", seen)
	}
	flat := *cal
	flat.Distortion = nil
	q, err := pipeline.Build(r, cat, pipeline.Options{Calibrations: map[string]*pipeline.Calibration{"ring": &flat}})
	if err != nil || q.DetectionHash == p.DetectionHash {
		t.Errorf("the map does not show in the detection hash (%v)", err)
	}
}
