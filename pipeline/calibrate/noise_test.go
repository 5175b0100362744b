package calibrate

import (
	"math"
	"testing"
)

func TestDarkVarianceIsClippedAsInEMVA(t *testing.T) {
	if got := noiseModel(1, 0.1).DarkDN; math.Abs(got*got-0.24) > 1e-12 {
		t.Errorf("got %v DN², want 0.24", got*got)
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
