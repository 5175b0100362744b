package darkfield

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

const side = 256

// surface is white noise of 1.5 DN on a level, with a spot of the height given.
func surface(level, spot float64) *raster.Plane {
	random := rand.New(rand.NewPCG(6, 6))
	p := raster.NewPlane(side, side)
	for i := range p.Pix {
		r2 := math.Pow(float64(i%side)-100, 2) + math.Pow(float64(i/side)-120, 2)
		p.Pix[i] = float32(level + 1.5*random.NormFloat64() + spot*math.Exp(-r2/4.5))
	}
	return p
}

// run runs the stage on a corrected plane with the whole frame as region.
func run(t *testing.T, p *raster.Plane, change func(*Settings), prepare func(*pipeline.Item)) *pipeline.Item {
	t.Helper()
	decode := func(dst any) error { change(dst.(*Settings)); return nil }
	stage, _, err := Factory.New(decode, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	var spans []raster.Span
	for y := range p.Height {
		spans = append(spans, raster.Span{Y: y, X0: 0, X1: p.Width})
	}
	item := &pipeline.Item{View: "ring", Region: pipeline.NewRegion(p.Width, p.Height, 0, 0, 0, []pipeline.Zone{{Name: "all", Spans: spans}})}
	item.SetPlane(pipeline.CorrectedPlane, "DN", p)
	if prepare != nil {
		prepare(item)
	}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	return item
}

func at(t *testing.T, item *pipeline.Item, name string, x, y int) float64 {
	t.Helper()
	p, err := item.Plane(name)
	if err != nil {
		t.Fatal(err)
	}
	return float64(p.At(x, y))
}

// The spot's peak under the 5 × 5 binomial filter is 30·s²/(s²+1) with s² = 2.25, in units
// of 0.2734 × 1.5 DN: 50.6.
func TestContrastInSigmas(t *testing.T) {
	for polarity, want := range map[string][2]float64{Bright: {50.6, -50.6}, Dark: {-50.6, 50.6}, Both: {50.6, 50.6}} {
		for i, spot := range []float64{30, -30} {
			item := run(t, surface(40, spot), func(s *Settings) { s.Polarity = polarity }, nil)
			if got := at(t, item, pipeline.SNRPlane, 100, 120); math.Abs(got-want[i]) > 4 {
				t.Errorf("%s, spot %g: %.1f sigmas, want %.1f", polarity, spot, got, want[i])
			}
		}
	}
}

func TestCoverageAndMeasurements(t *testing.T) {
	item := run(t, surface(40, 30), func(*Settings) {}, func(item *pipeline.Item) {
		item.BadMask, item.SaturatedAt = raster.NewMask(side, side), raster.NewMask(side, side)
		for i := range item.BadMask.Bits {
			item.BadMask.Bits[i] = i%side < 64 && i/side < 40 // more than half of the first cell
		}
		item.SaturatedAt.Set(200, 200, true)
	})
	c := item.Coverage
	want := 1 - (64.*64+1)/(side*side)
	if math.Abs(c.Share-want) > 1e-12 || c.MaskedPx != 64*64 || c.SaturatedPx != 1 || math.Abs(c.Background-40) > 0.2 || math.Abs(c.Noise-1.5) > 0.08 {
		t.Errorf("got %+v, want a share of %.6f", c, want)
	}
	if v, ok := item.Number("noise_dn"); !ok || v != c.Noise {
		t.Errorf("noise_dn is %g, %v", v, ok)
	}
}

// A surface that is matt or grainy everywhere is background to a local threshold; the
// absolute bounds hold it.
func TestAbsoluteBoundsHold(t *testing.T) {
	bounds := func(s *Settings) { s.MaxBackgroundDN, s.MaxNoiseDN = 60, 3 }
	for level, ok := range map[float64]bool{40: true, 90: false} {
		item := run(t, surface(level, 0), bounds, nil)
		if p := item.Proofs[0]; p.Name != "background" || p.OK != ok || ok == (p.Reason != "") {
			t.Errorf("level %g: %+v", level, p)
		}
		if p := item.Proofs[1]; p.Name != "noise" || !p.OK {
			t.Errorf("level %g: %+v", level, p)
		}
	}
}

func TestEmptyRegion(t *testing.T) {
	item := run(t, surface(40, 30), func(s *Settings) { s.MaxNoiseDN = 1 }, func(item *pipeline.Item) {
		item.Region = pipeline.NewRegion(side, side, 0, 0, 0, nil)
	})
	if item.Coverage.Share != 0 || at(t, item, pipeline.SNRPlane, 100, 120) != 0 {
		t.Errorf("coverage %+v, want none", item.Coverage)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"grid_px":           func(s *Settings) { s.GridPx = 8 },
		"polarity":          func(s *Settings) { s.Polarity = "grey" },
		"max_background_dn": func(s *Settings) { s.MaxBackgroundDN = math.NaN() },
		"max_noise_dn":      func(s *Settings) { s.MaxNoiseDN = -1 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
