package coverage

import (
	"context"
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
)

type step struct {
	pipeline.Factory
	decode pipeline.Decode
}

// see runs the chain to the snr plane and the coverage of a unit.
func see(t *testing.T, r *stagetest.Rendered, u render.Unit, change func(*Settings)) *pipeline.Item {
	t.Helper()
	item := r.Item(&u, "ring")
	for _, f := range []step{
		{region.Factory, func(dst any) error {
			s := dst.(*region.Settings)
			s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity, s.RimMM = region.FoundCircle, 6, 0.2, "rim", 0.25
			return nil
		}},
		{flatfield.Factory, nil}, {darkfield.Factory, nil},
		{Factory, func(dst any) error { change(dst.(*Settings)); return nil }},
	} {
		st, _, err := f.New(f.decode, r.Env("ring"))
		if err != nil {
			t.Fatal(err)
		}
		if err := st.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
	}
	return item
}

// noisy is the small scene without light fall-off, with a haze and a dark noise that make
// the noise, and texture and fixed pattern left out.
func noisy(hazeDN, darkNoiseE float64) render.Scene {
	s := stagetest.SmallScene()
	s.Camera.ResponseSpread, s.Camera.DarkSpreadDN, s.Camera.HotPixels, s.Camera.DarkNoiseE = 0, 0, 0, darkNoiseE
	s.Camera.PixelFormat, s.Camera.GainDNPerE = "Mono12", 0.25
	s.Views = s.Views[:1]
	s.Views[0].Vignetting = 0
	s.Processes[0].HazeDN, s.Processes[0].HazeTexture = render.Distribution{Value: hazeDN}, 0
	return s
}

// The stated smallest diameter is found with probability one half, and one 1.3 times as
// large in 9 of 10 cases: over rendered cells of several noises and contrasts, by the snr
// plane reaching k_high within 2 px of the place.
func TestSmallestDiameterIsToldTrue(t *testing.T) {
	for _, c := range []struct{ haze, darkE, contrast float64 }{{40, 8, 60}, {400, 8, 300}, {100, 40, 120}} {
		r := stagetest.Render(t, noisy(c.haze, c.darkE))
		ask := func(s *Settings) { s.SmallestDigUM, s.DigContrastDN, s.BlurPx = 1e5, c.contrast, 0.7 }
		found, n := map[float64]float64{}, map[float64]float64{}
		for i := range 4 {
			empty := see(t, r, r.Unit(i), ask)
			for _, times := range []float64{1, 1.3} {
				u := r.Unit(i)
				place(&u, empty, times, c.contrast)
				with := see(t, r, u, ask)
				for _, o := range u.Objects {
					n[times]++
					if seen(t, with, o) {
						found[times]++
					}
				}
			}
		}
		half, nine := found[1]/n[1], found[1.3]/n[1.3]
		t.Logf("haze %g DN, dark noise %g e, contrast %g DN: found %.3f at the size and %.3f at 1.3 times it, of %g digs", c.haze, c.darkE, c.contrast, half, nine, n[1])
		if math.Abs(half-0.5) > 0.1 || nine < 0.9 {
			t.Errorf("haze %g DN, dark noise %g e, contrast %g DN: found %.3f at the size, want 0.5 ± 0.1, and %.3f at 1.3 times it, want 0.9 or more", c.haze, c.darkE, c.contrast, half, nine)
		}
	}
}

// place lays digs of the size that their cell states, times a factor, over the part, at
// all fractions of a pixel.
func place(u *render.Unit, empty *pipeline.Item, times, contrast float64) {
	m := empty.CoverageMap
	for k := range 80 {
		a, d := 2.399963*float64(k), 290*math.Sqrt(float64(k)+1) // a sunflower: even, and aligned with no pixel grid
		o := render.Object{Kind: pipeline.Dig, UUM: d * math.Cos(a), VUM: d * math.Sin(a), BrightnessDN: contrast}
		x, y := empty.Geometry.ToPixel(o.UUM, o.VUM)
		if i := int(y+0.5)/m.CellPx*m.Columns + int(x+0.5)/m.CellPx; m.DigUM[i] > 0 {
			o.DiameterUM = times * (float64(m.DigUM[i]) - 0.5) // the map rounds up
			u.Add(o)
		}
	}
}

func seen(t *testing.T, item *pipeline.Item, o render.Object) bool {
	snr, err := item.Plane(pipeline.SNRPlane)
	if err != nil {
		t.Fatal(err)
	}
	x, y := item.Geometry.ToPixel(o.UUM, o.VUM)
	for dy := -2; dy <= 2; dy++ {
		for dx := -2; dx <= 2; dx++ {
			if snr.At(int(x+0.5)+dx, int(y+0.5)+dy) >= float32(Default.KHigh) {
				return true
			}
		}
	}
	return false
}

// A long scratch of the stated width is found at a place with probability one half, and
// more often where five pixels along it are chances of their own.
func TestFaintestScratch(t *testing.T) {
	r := stagetest.Render(t, noisy(100, 8))
	ask := func(s *Settings) { s.ScratchWidthUM, s.ScratchContrastDN, s.BlurPx = 1e5, 120, 0.7 }
	found, n := 0., 0.
	for i := range 10 {
		u := r.Unit(i)
		m := see(t, r, u, ask).CoverageMap
		width := float64(m.ScratchUM[m.Rows/2*m.Columns+m.Columns/2])
		if width < 1 {
			t.Fatalf("width %g", width)
		}
		u.Add(render.Object{Kind: pipeline.Scratch, LengthUM: 3000, WidthUM: width - 0.5, BrightnessDN: 120, AngleDeg: float64(17 * i)})
		with := see(t, r, u, ask)
		for k := -10; k <= 10; k++ {
			sin, cos := math.Sincos(-float64(17*i) * math.Pi / 180)
			n++
			if seen(t, with, render.Object{UUM: 120 * float64(k) * cos, VUM: 120 * float64(k) * sin}) {
				found++
			}
		}
	}
	t.Logf("found at %.3f of %g places", found/n, n)
	if share := found / n; share < 0.4 || share > 0.9 {
		t.Errorf("found at %.3f of the places, want 0.4 to 0.9", share)
	}
}

func TestSharesAndCauses(t *testing.T) {
	const width, height, cell = 64, 48, 16
	mask, bad, hot := raster.NewMask(width, height), raster.NewMask(width, height), raster.NewMask(width, height)
	for i := range mask.Bits {
		mask.Bits[i] = true
	}
	for x := range 16 {
		bad.Set(x, 0, true)
		hot.Set(20+x, 20, true)
	}
	n := 4 * 3
	g := &raster.Grid{CellPx: cell, Columns: 4, Rows: 3, Level: make([]float64, n), Noise: make([]float64, n), Inside: make([]int, n), Valid: make([]int, n), Filled: make([]bool, n)}
	for i := range n {
		g.Noise[i], g.Inside[i], g.Valid[i] = 1, 256, 256
	}
	g.Noise[11], g.Valid[3] = 50, 100
	item := &pipeline.Item{Region: pipeline.NewRegion(width, height, 32, 24, 0, []pipeline.Zone{{Name: "all", Spans: mask.Spans()}}), Geometry: pipeline.Planar{UMPerPx: 10},
		Grid: g, BadMask: bad, SaturatedAt: hot}
	st, _, err := Factory.New(func(dst any) error {
		s := dst.(*Settings)
		s.SmallestDigUM, s.DigContrastDN = 60, 50
		return nil
	}, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	if err := st.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	m := item.CoverageMap
	if m.DigUM[3] != -1 || m.DigUM[11] != -1 || m.DigUM[0] < 1 || m.DigUM[0] > 30 {
		t.Errorf("map %v", m.DigUM)
	}
	total := float64(width * height)
	if m.UnseenShare != (16+256)/total || m.SaturatedShare != 16/total || m.NoisyShare != 256/total || math.Abs(item.Coverage.Share-(total-16-256-16-256)/total) > 1e-12 {
		t.Errorf("shares %+v and %g", m, item.Coverage.Share)
	}
	text := pipeline.CoverageCause(pipeline.Evidence{Views: []pipeline.ViewEvidence{{Name: "ring", CoverageMap: m}}})
	if !strings.Contains(text, "view ring: 8.3 % noise or too little light") {
		t.Errorf("cause %q", text)
	}
}

// Half the light needs twice the size of a small dig's flux: the smallest diameter grows.
func TestWeakLightCoversLess(t *testing.T) {
	o := optics{sigmaPx: 1.3, umPerPx: 10}
	full, _ := o.discUM(100, 6, 1)
	half, ok := o.discUM(50, 6, 1)
	if !ok || half/full < 1.38 || half/full > 1.45 { // d² ∝ 1/contrast for small dots
		t.Errorf("%g and %g µm", full, half)
	}
	if _, ok := o.discUM(1.6, 6, 1); ok {
		t.Error("a contrast below the threshold is found")
	}
	curve := pipeline.Sizing{Exponent: 2, FluxDNPx: 100 * math.Pi / 4 * 25, ReferenceUM: 50}
	if d, ok := o.onCurveUM(curve, 1, 6, 1); !ok || math.Abs(d-full) > 0.05*full {
		t.Errorf("on the curve of a contrast of 100 DN: %g µm, want %g", d, full)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"smallest_dig_um": func(s *Settings) { s.SmallestDigUM = -1 }, "k_high": func(s *Settings) { s.KHigh = 0 }, "margin": func(s *Settings) { s.Margin = 0.5 },
		"blur_px": func(s *Settings) { s.BlurPx = math.NaN() }, "scratch_contrast_dn": func(s *Settings) { s.ScratchWidthUM = 10 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
	if _, _, err := Factory.New(func(dst any) error { dst.(*Settings).SmallestDigUM = 50; return nil }, pipeline.Environment{}); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("neither contrast nor curve: got %v", err)
	}
}

// Rows that were not transferred are quiet, and nothing is found in them: their cells are
// not inspected.
func TestABlackBandIsNotInspected(t *testing.T) {
	s := stagetest.SmallScene()
	s.Spoilers = []render.Spoiler{{Unit: 1, Kind: render.SpoilBlackBand, Value: 0.1}}
	r := stagetest.Render(t, s)
	ask := func(s *Settings) { s.SmallestDigUM, s.DigContrastDN, s.BlurPx = 200, 60, 0.7 }
	good, spoiled := see(t, r, r.Unit(0), ask), see(t, r, r.Unit(1), ask)
	if good.Coverage.Share < 0.98 || good.CoverageMap.UnseenShare > 0.02 {
		t.Errorf("a whole frame: %+v", good.Coverage)
	}
	m := spoiled.CoverageMap
	if spoiled.Coverage.Share > 0.9 || m.UnseenShare < 0.1 {
		t.Errorf("a tenth of the rows is black: %.3f inspected, %.3f unseen", spoiled.Coverage.Share, m.UnseenShare)
	}
	for column := range m.Columns {
		if i := 180/m.CellPx*m.Columns + column; m.Inside(i) && m.Inspected(i) { // row 180 is the middle of the band
			t.Errorf("cell %d of the band counts as inspected: %d µm", i, m.DigUM[i])
		}
	}
}
