package calibrate

import (
	"math"
	"slices"
	"testing"

	"lapgate/pipeline"
)

func TestPlanesFollowTheirFormulas(t *testing.T) {
	c := newCamera(96, 64)
	dark := c.take("dark", 8, flat(0))
	stray := c.take("stray", 8, func(x, _ int) float64 { return 10 * float64(x) })
	response := c.take("flat", 8, c.vignetted(diffuser))
	m, err := Make(request(), Inputs{Dark: Frames(dark...), Stray: Frames(stray...), Response: Frames(response...)})
	if err != nil {
		t.Fatal(err)
	}
	cal := m.Calibration
	var wantDark, wantStray float64
	const x, y = 50, 30
	for i := range dark {
		d, _ := dark[i].Raw.Counts()
		s, _ := stray[i].Raw.Counts()
		wantDark += float64(d[y*c.width+x]) / 8
		wantStray += float64(s[y*c.width+x]) / 8
	}
	if got := float64(cal.Dark.At(x, y)); math.Abs(got-wantDark) > 1e-4 {
		t.Errorf("dark: got %v, want %v", got, wantDark)
	}
	if got := float64(cal.Stray.At(x, y)); math.Abs(got-(wantStray-wantDark)) > 1e-4 {
		t.Errorf("stray: got %v, want %v", got, wantStray-wantDark)
	}
	if got := meanOf(cal.Response); math.Abs(got-1) > 1e-6 {
		t.Errorf("response: mean %v, want 1", got)
	}
	truth := c.vignetted(1)
	ratio := float64(cal.Response.At(48, 32)/cal.Response.At(0, 0)) / (truth(48, 32) / truth(0, 0))
	if math.Abs(ratio-1) > 0.03 { // two pixels of 8 frames: 1.7 % / √8 noise each, four sigmas
		t.Errorf("fall-off: %v of the truth", ratio)
	}
	// The norm is the diffuser's mean: 0.25 · 0.6 · 6000 times the mean fall-off of 0.9.
	if math.Abs(m.Provenance.NormDN/810-1) > 0.005 {
		t.Errorf("norm: got %v DN, want 810", m.Provenance.NormDN)
	}
	if len(m.Provenance.Frames) != 24 || m.Provenance.Frames[0].Kind != "dark" {
		t.Errorf("provenance: %d frames", len(m.Provenance.Frames))
	}
}

func TestBadPixelsAreFound(t *testing.T) {
	c := newCamera(96, 64)
	hot, dead, weak, blinking := 10*c.width+7, 20*c.width+95, 30*c.width+30, 40*c.width+40
	dark, response := c.take("dark", 6, flat(0)), c.take("flat", 6, flat(diffuser))
	edit := func(frames []Frame, change func(i int, counts []uint16)) {
		for i := range frames {
			counts, _ := frames[i].Raw.Counts()
			change(i, counts)
			frames[i] = c.frame(frames[i].Name, counts)
		}
	}
	edit(dark, func(i int, v []uint16) { v[hot] += 60; v[blinking] += uint16(i % 2 * 40) })
	edit(response, func(_ int, v []uint16) {
		v[hot] += 60
		v[dead] = 20
		v[weak] = uint16(0.7 * float64(v[weak]))
	})
	m, err := Make(request(), Inputs{Dark: Frames(dark...), Response: Frames(response...)})
	if err != nil {
		t.Fatal(err)
	}
	var want []pipeline.PixelAt
	for _, i := range []int{hot, dead, weak, blinking} {
		want = append(want, pipeline.PixelAt{X: i % c.width, Y: i / c.width})
	}
	if !slices.Equal(m.Calibration.BadPixels, want) {
		t.Errorf("got %v, want %v", m.Calibration.BadPixels, want)
	}
	b := m.Provenance.Bad
	if b.Hot < 1 || b.Noisy != 1 || b.Deviating != 1 || b.Dead != 1 || b.Saturated != 0 {
		t.Errorf("reasons: %+v", b)
	}
	if v := m.Calibration.Response.At(dead%c.width, dead/c.width); math.Abs(float64(v)-1) > 0.05 {
		t.Errorf("response at the dead pixel: got %v, want its neighbours' 1", v)
	}
}

// The corrected diffuser is flat: what is left is the noise of one frame and that of
// the N averaged ones, √(1 + 1/N).
func TestCorrectionLeavesNoise(t *testing.T) {
	const n = 4
	c := newCamera(320, 320)
	m, err := Make(request(), Inputs{Dark: Frames(c.take("dark", 16, flat(0))...), Response: Frames(c.take("flat", n, c.vignetted(diffuser))...)})
	if err != nil {
		t.Fatal(err)
	}
	var floor float64
	corrected := make([]float64, 0, c.width*c.height)
	for i, v := range c.counts(c.vignetted(diffuser)) {
		dark, response := float64(m.Calibration.Dark.Pix[i]), float64(m.Calibration.Response.Pix[i])
		corrected = append(corrected, (float64(v)-dark)/response)
		signal := m.Provenance.NormDN * response
		k := m.Calibration.Noise.GainDNPerE
		floor += (k*signal + math.Pow(m.Calibration.Noise.DarkDN, 2)) / (response * response) / float64(c.width*c.height)
	}
	_, sd := meanAndSD(corrected)
	want := math.Sqrt(floor * (1 + 1.0/n))
	if math.Abs(sd/want-1) > 0.02 {
		t.Errorf("spread %v DN, want %v", sd, want)
	}
}

func TestWithoutResponseGainIsUnknown(t *testing.T) {
	c := newCamera(64, 64)
	m, err := Make(request(), Inputs{Dark: Frames(c.take("dark", 2, flat(0))...)})
	if err != nil {
		t.Fatal(err)
	}
	if m.Calibration.Response != nil || m.Calibration.Noise.GainDNPerE != 0 || DarkNoiseE(m.Calibration.Noise) != 0 {
		t.Errorf("got %+v", m.Calibration.Noise)
	}
}
