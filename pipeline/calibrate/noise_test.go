package calibrate

import (
	"math"
	"testing"
)

// Worked two-image example; exact.
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

// EMVA 1288 linear model at K = 0.25 DN/e⁻, σ_d = 8 e⁻, η = 0.6, dark 20 DN, for 0,
// 1000, 5000 and 10 000 photons: noise-free points give K exactly.
func TestSystemGainOnModelPoints(t *testing.T) {
	dark := Level{20, 4.0 + 1.0/12}
	bright := []Level{{170, 41.5 + 1.0/12}, {770, 191.5 + 1.0/12}, {1520, 379 + 1.0/12}}
	k, err := SystemGain(bright, []Level{dark})
	if err != nil || math.Abs(k-0.25) > 1e-12 {
		t.Errorf("got %v, %v, want 0.25", k, err)
	}
	if e := DarkNoiseE(noiseModel(k, dark.VarianceDN2)); math.Abs(e-8) > 1e-9 {
		t.Errorf("dark noise: got %v e⁻, want 8", e)
	}
	if sd := noiseModel(k, dark.VarianceDN2).DarkDN; math.Abs(sd-2.020726) > 1e-6 {
		t.Errorf("dark noise: got %v DN, want 2.020726", sd)
	}
}

func TestDarkVarianceIsClippedAsInEMVA(t *testing.T) {
	if got := noiseModel(1, 0.1).DarkDN; math.Abs(got*got-0.24) > 1e-12 {
		t.Errorf("got %v DN², want 0.24", got*got)
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

// Pairs of one million pixels: K and dark noise within 1 %.
func TestSimulatedMillionPixelPairs(t *testing.T) {
	c := newCamera(1000, 1000)
	m, err := Make(request(), Inputs{Dark: Frames(c.take("dark", 2, flat(0))...), Response: Frames(c.take("flat", 2, c.vignetted(diffuser))...)})
	if err != nil {
		t.Fatal(err)
	}
	n := m.Calibration.Noise
	t.Logf("K %.5f DN/e⁻, dark %.4f DN = %.4f e⁻, from %d tiles", n.GainDNPerE, n.DarkDN, DarkNoiseE(n), m.Provenance.GainLevels)
	if math.Abs(n.GainDNPerE/0.25-1) > 0.01 {
		t.Errorf("K: got %v, want 0.25 within 1 %%", n.GainDNPerE)
	}
	if math.Abs(DarkNoiseE(n)/8-1) > 0.01 {
		t.Errorf("dark noise: got %v e⁻, want 8 within 1 %%", DarkNoiseE(n))
	}
	if len(m.Calibration.BadPixels) > 0 {
		t.Errorf("bad pixels in a sensor without any: %v", m.Calibration.BadPixels)
	}
}
