package blobs

import (
	"context"
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

const side = 200

// item has planes of one level, a noise of 1 DN and the snr plane that shape gives.
func item(shape func(x, y float64) float64) *pipeline.Item {
	background, noise := raster.NewPlane(side, side), raster.NewPlane(side, side)
	corrected, snr, signal := raster.NewPlane(side, side), raster.NewPlane(side, side), raster.NewPlane(side, side)
	var spans []raster.Span
	mask := raster.NewMask(side, side)
	for i := range snr.Pix {
		background.Pix[i], noise.Pix[i], mask.Bits[i] = 20, 1, true
		signal.Pix[i] = float32(shape(float64(i%side), float64(i/side)))
		corrected.Pix[i] = 20 + signal.Pix[i]
	}
	for y := range side {
		spans = append(spans, raster.Span{Y: y, X0: 0, X1: side})
	}
	raster.MatchedFilter(snr, signal, mask)
	raster.SNR(snr, snr, noise)
	for i, v := range snr.Pix {
		snr.Pix[i] = max(v, -v)
	}
	zone := pipeline.Zone{Name: "clear", Spans: spans, EdgeDistancePx: func(x, _ float64) float64 { return x }}
	it := &pipeline.Item{View: "ring", Geometry: pipeline.Planar{OriginX: 100, OriginY: 100, UMPerPx: 10},
		Region: pipeline.NewRegion(side, side, 100, 100, 0, []pipeline.Zone{zone})}
	for name, p := range map[string]*raster.Plane{pipeline.CorrectedPlane: corrected, pipeline.BackgroundPlane: background, pipeline.NoisePlane: noise, pipeline.SNRPlane: snr} {
		it.SetPlane(name, "", p)
	}
	return it
}

func run(t *testing.T, it *pipeline.Item, change func(*Settings)) []pipeline.Defect {
	t.Helper()
	stage, _, err := Factory.New(func(dst any) error { change(dst.(*Settings)); return nil }, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	if err := stage.Run(context.Background(), it); err != nil {
		t.Fatal(err)
	}
	return it.Defects
}

func plain(*Settings) {}

// gauss is a round spot of sigma 2 px.
func gauss(x, y, cx, cy, height float64) float64 {
	return height * math.Exp(-((x-cx)*(x-cx)+(y-cy)*(y-cy))/8)
}

// A Gaussian spot: full width at half height 2.3548·sigma (with the 1/2 px² of the
// smoothing, √4.5 px; the plateau is a mean over the core, so a peaked spot comes out a
// few per cent wide), flux 2π·sigma²·height; all lengths at 10 µm/px.
func TestDefectOfASpot(t *testing.T) {
	it := item(func(x, y float64) float64 { return gauss(x, y, 130.3, 80.6, 50) })
	it.SaturatedAt = raster.NewMask(side, side)
	d := run(t, it, plain)
	if len(d) != 1 {
		t.Fatalf("%d defects, want 1", len(d))
	}
	g := d[0]
	near := func(name string, got, want, tolerance float64) {
		if math.Abs(got-want) > tolerance {
			t.Errorf("%s: got %g, want %g ± %g", name, got, want, tolerance)
		}
	}
	near("x", g.XPx, 130.3, 0.01)
	near("y", g.YPx, 80.6, 0.01)
	near("u", g.UUM, 303, 0.1)
	near("v", g.VUM, 194, 0.1)
	near("diameter", g.DiameterUM, 10*2.3548*math.Sqrt(4.5), 2)
	near("area", g.AreaUM2, math.Pi/4*g.DiameterUM*g.DiameterUM, 1e-6)
	near("flux", g.Flux, 2*math.Pi*4*50, 2)
	near("peak", g.PeakDN, 50, 3)
	near("edge distance", g.EdgeDistanceUM, 1303, 0.1)
	if g.Kind != pipeline.Dig || g.Zone != "clear" || g.View != "ring" || g.Dark || g.Saturated || g.PartAngleKnown || g.Path != nil {
		t.Errorf("got %+v", g)
	}
}

// A spot of sigma 1 px and flux 2π·50 under a curve that gives 20 µm for it, with a lamp
// 10 % up: sized by flux / 1.1; not when it is saturated, or twice as wide as the blur.
func TestSmallDefectsAreSizedByFlux(t *testing.T) {
	spot := func(x, y float64) float64 { return 50 * math.Exp(-((x-80)*(x-80)+(y-90)*(y-90))/2) }
	curve := pipeline.Sizing{Exponent: 1.5, FluxDNPx: 2 * math.Pi * 50, ReferenceUM: 20, MinUM: 5, MaxUM: 50, Residual: 0.1, BlurWidthPx: 3}
	sized := func(change func(*pipeline.Item, *pipeline.Sizing)) pipeline.Defect {
		it, c := item(spot), curve
		change(it, &c)
		it.Calibration = &pipeline.Calibration{Sizing: &c}
		return run(t, it, plain)[0]
	}
	d := sized(func(*pipeline.Item, *pipeline.Sizing) {})
	if math.Abs(d.DiameterFluxUM-20) > 0.5 || d.DiameterFluxUncertaintyUM < 0.1*d.DiameterFluxUM || d.DiameterUM < 25 {
		t.Errorf("got %v ± %v µm by flux, %v by outline", d.DiameterFluxUM, d.DiameterFluxUncertaintyUM, d.DiameterUM)
	}
	brighter := sized(func(it *pipeline.Item, _ *pipeline.Sizing) {
		it.Prove(pipeline.Proof{Name: pipeline.ProofLight, Value: 1.1, Unit: "1", OK: true})
	})
	if got, want := brighter.DiameterFluxUM/d.DiameterFluxUM, math.Pow(1/1.1, 1/1.5); math.Abs(got-want) > 1e-6 {
		t.Errorf("a brighter lamp scales by %v, want %v", got, want)
	}
	for name, change := range map[string]func(*pipeline.Item, *pipeline.Sizing){
		"saturated": func(it *pipeline.Item, _ *pipeline.Sizing) {
			it.SaturatedAt = raster.NewMask(side, side)
			it.SaturatedAt.Set(80, 90, true)
		},
		"resolved":     func(_ *pipeline.Item, c *pipeline.Sizing) { c.BlurWidthPx = 1 },
		"out of range": func(_ *pipeline.Item, c *pipeline.Sizing) { c.MinUM, c.MaxUM = 30, 60 },
	} {
		if d := sized(change); d.DiameterFluxUM != 0 || d.DiameterFluxUncertaintyUM != 0 {
			t.Errorf("%s: sized %v µm by flux", name, d.DiameterFluxUM)
		}
	}
}

func TestDarkAndSaturated(t *testing.T) {
	it := item(func(x, y float64) float64 { return gauss(x, y, 60, 60, -50) + gauss(x, y, 140, 140, 200) })
	it.SaturatedAt = raster.NewMask(side, side)
	it.SaturatedAt.Set(140, 140, true)
	d := run(t, it, plain)
	if len(d) != 2 || !d[0].Dark || d[0].Flux <= 0 || d[0].Saturated || d[1].Dark || !d[1].Saturated {
		t.Errorf("got %+v", d)
	}
}

func TestLongBlobIsAScratchWithItsPath(t *testing.T) {
	it := item(func(x, y float64) float64 {
		if along := x + y - 200; math.Abs(along) < 100 {
			return 30 * math.Exp(-(x-y)*(x-y)/4/2)
		}
		return 0
	})
	d := run(t, it, plain)
	if len(d) != 1 || d[0].Kind != pipeline.Scratch || math.Abs(d[0].AngleDeg-45) > 0.5 || math.Abs(d[0].LengthPx-200/math.Sqrt2) > 4 || len(d[0].Path) < 10 {
		t.Fatalf("got %+v", d)
	}
	for _, p := range d[0].Path {
		if math.Abs(p.X-p.Y) > 0.1 || math.Abs(p.X+p.Y-200) > 101 {
			t.Errorf("path leaves the scratch at %+v", p)
		}
	}
	if d := run(t, item(func(x, y float64) float64 { return gauss(x, y/4, 100, 25, 40) }), func(s *Settings) { s.ScratchMinLengthPx = 500 }); d[0].Kind != pipeline.Dig {
		t.Errorf("short: %s, want dig", d[0].Kind)
	}
}

func TestThresholdsAndArea(t *testing.T) {
	faint := func(x, y float64) float64 { return gauss(x, y, 100, 100, 1.9) } // 1.9·4/5/0.2734 = 5.56 sigmas
	if d := run(t, item(faint), plain); len(d) != 0 {
		t.Errorf("%d defects below k_high", len(d))
	}
	if d := run(t, item(faint), func(s *Settings) { s.KHigh = 5 }); len(d) != 1 || d[0].AreaPx > 20 {
		t.Errorf("got %+v", d)
	}
	if d := run(t, item(faint), func(s *Settings) { s.KHigh, s.MinAreaPx = 5, 30 }); len(d) != 0 {
		t.Errorf("%d defects below min_area_px", len(d))
	}
}

// More blobs than the evidence holds: the strongest stay and the item says it was cut.
func TestTooManyBlobs(t *testing.T) {
	it := item(func(x, y float64) float64 {
		if math.Mod(x, 4) == 2 && math.Mod(y, 4) == 2 {
			return 35 + x/20
		}
		return 0
	})
	d := run(t, it, func(s *Settings) { s.KLow, s.KHigh = 16, 16 })
	if len(d) != pipeline.MaxDefects || !it.Truncated {
		t.Fatalf("%d defects, truncated %v", len(d), it.Truncated)
	}
	if d[0].XPx < 20 {
		t.Errorf("the weakest were kept: first at x = %g", d[0].XPx)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"k_low":                 func(s *Settings) { s.KLow = 9 },
		"k_high":                func(s *Settings) { s.KHigh = math.NaN() },
		"min_area_px":           func(s *Settings) { s.MinAreaPx = -1 },
		"scratch_ratio":         func(s *Settings) { s.ScratchRatio = math.NaN() },
		"scratch_min_length_px": func(s *Settings) { s.ScratchMinLengthPx = -1 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
