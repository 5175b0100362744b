package emva

import (
	"math"
	"testing"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g ± %g", what, got, want, tolerance)
	}
}

// Worked two-image example of EMVA Standard 1288; exact.
func TestPairExample(t *testing.T) {
	got := Pair([]uint16{100, 102, 98, 101}, []uint16{101, 99, 100, 103})
	if want := (Level{100.5, 2.125}); got != want {
		t.Errorf("got %+v, want %+v", got, want)
	}
}

// The lamp's change between two frames is not noise.
func TestPairIgnoresLampChange(t *testing.T) {
	if got := Pair([]uint16{10, 20, 30}, []uint16{15, 25, 35}); got.VarianceDN2 != 0 {
		t.Errorf("got %v DN², want 0", got.VarianceDN2)
	}
}

// model is the noise-free camera of the linear model, σ²_y = K²σ²_d + 1/12 + K(μ_y − μ_y.dark):
// K = 0.25 DN/e⁻, σ_d = 8 e⁻, η = 0.6, dark 20 DN.
func model(photons float64) Point {
	const dark = 4.0 + 1.0/12
	return Point{ExposureUS: 10 + photons, Photons: photons, Dark: Level{20, dark}, Bright: Level{20 + 0.15*photons, dark + 0.25*0.15*photons}}
}

// The values for 0, 1 000, 5 000 and 10 000 photons, recomputed from the model's formulas.
func TestModelPoints(t *testing.T) {
	for _, p := range [][3]float64{{0, 20, 4.08333}, {1000, 170, 41.58333}, {5000, 770, 191.58333}, {10000, 1520, 379.08333}} {
		m := model(p[0]).Bright
		near(t, "mean", m.MeanDN, p[1], 1e-9)
		near(t, "variance", m.VarianceDN2, p[2], 5e-6)
	}
}

// A 10-bit full scale of 1 023 DN over dark 20 DN: 4 012 e⁻, SNR 63.340 = 36.03 dB, dynamic
// range 467.44 = 53.39 dB, threshold 14.30484 photons.
func TestFiguresOfTheModel(t *testing.T) {
	const saturating = 1003 / 0.15
	ramp := []Point{model(0), model(500), model(1000), model(2000), model(3000), model(4000), model(5000), model(saturating)}
	clipped := model(9000)
	clipped.Bright = Level{1023, 0}
	f, err := Evaluate(append(ramp, clipped))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "K", f.GainDNPerE, 0.25, 1e-12)
	near(t, "K uncertainty", f.GainU, 0, 1e-12)
	near(t, "dark noise DN", f.DarkNoiseDN, 2.020726, 5e-7)
	near(t, "dark noise", f.DarkNoiseE, 8, 1e-9)
	near(t, "quantum efficiency", f.Efficiency, 0.6, 1e-12)
	near(t, "responsivity", f.Responsivity, 0.15, 1e-12)
	near(t, "saturation", f.SaturationE, 4012, 1e-6)
	near(t, "SNR max", f.SNRMax, 63.340, 5e-4)
	near(t, "SNR max, dB", Decibels(f.SNRMax), 36.03, 0.005)
	near(t, "threshold", f.ThresholdPhotons, 14.30484, 5e-6)
	near(t, "dynamic range", f.DynamicRange, 467.44, 0.005)
	near(t, "dynamic range, dB", Decibels(f.DynamicRange), 53.39, 0.005)
	near(t, "linearity", f.LinearityHigh-f.LinearityLow, 0, 1e-9)
	if !f.SaturationReached || f.Levels != 6 {
		t.Errorf("saturation reached %v, %d levels below 70 %%, want true and 6", f.SaturationReached, f.Levels)
	}
	// η·μ_p of 600, 3 000 and 6 000 electrons.
	for _, p := range [][3]float64{{1000, 23.26117, 27.333}, {5000, 54.18541, 34.678}, {10000, 77.04136, 37.734}} {
		near(t, "SNR", f.SNR(0.6*p[0]), p[1], 5e-6)
		near(t, "SNR, dB", Decibels(f.SNR(0.6*p[0])), p[2], 5e-4)
	}
}

// Without photon counts everything in electrons stays the same, and the rest is not given.
func TestFiguresWithoutPhotons(t *testing.T) {
	ramp := []Point{model(0), model(1000), model(3000), model(1003 / 0.15)}
	for i := range ramp {
		ramp[i].Photons = 0
	}
	f, err := Evaluate(ramp)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "K", f.GainDNPerE, 0.25, 1e-12)
	near(t, "saturation", f.SaturationE, 4012, 1e-6)
	near(t, "dynamic range", f.DynamicRange, 467.44, 0.005)
	if f.Efficiency != 0 || f.Responsivity != 0 || f.ThresholdPhotons != 0 || f.SaturationReached {
		t.Errorf("got %+v", f)
	}
}

// The line that minimises the relative deviations: there the gradient of
// Σ((y − a − b·x)/y)² vanishes. The deviation reported is the largest from that line.
func TestLinearityIsRelative(t *testing.T) {
	a, b, ok := relativeLine([]float64{1, 2, 3}, []float64{1, 2.2, 3})
	w := []float64{1, 1 / 4.84, 1. / 9}
	var ra, rb float64 // the gradient vanishes at the minimum
	for i, x := range []float64{1, 2, 3} {
		e := []float64{1, 2.2, 3}[i] - a - b*x
		ra, rb = ra+w[i]*e, rb+w[i]*e*x
	}
	if !ok || math.Abs(ra)+math.Abs(rb) > 1e-12 {
		t.Errorf("line %v + %v·x is not the minimum: gradient %v, %v", a, b, ra, rb)
	}
	f := Figures{SaturationDN: 4000}
	bent := []Point{{ExposureUS: 1, Bright: Level{1000, 0}}, {ExposureUS: 2, Bright: Level{2200, 0}}, {ExposureUS: 3, Bright: Level{3000, 0}}}
	f.linearity(bent)
	near(t, "highest", f.LinearityHigh, 100*(2.2-a-2*b)/(a+2*b), 1e-9)
	if f.LinearityLow >= 0 {
		t.Errorf("lowest %v, want below 0", f.LinearityLow)
	}
}

func TestRampsThatSayNothingAreRefused(t *testing.T) {
	dim := model(1000)
	dim.Bright.MeanDN = 10
	flat := model(1000)
	flat.Bright.VarianceDN2 = 4
	for name, ramp := range map[string][]Point{
		"one step": {model(100)}, "darker than dark": {dim, dim}, "falling": {model(1000), model(500)},
		"noise does not grow": {model(0), flat, flat},
	} {
		if _, err := Evaluate(ramp); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

func TestSystemGainRefusesNoiseThatDoesNotGrow(t *testing.T) {
	if _, err := SystemGain([]Level{{100, 4}}, []Level{{20, 4}}); err == nil {
		t.Error("no error")
	}
	if _, err := SystemGain([]Level{{20, 9}}, []Level{{20, 4}}); err == nil {
		t.Error("no error at dark level")
	}
}

func TestDarkVarianceIsClipped(t *testing.T) {
	near(t, "dark noise", DarkNoiseE(0.1, 1), math.Sqrt(0.24-1.0/12), 1e-12)
}
