package scratches

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
)

const side = 640

// item is a disc with a level of 20 DN, a noise of 1.5 DN and what shape adds, DN, as it
// is before the stage darkfield.
func item(seed uint64, shape func(p *raster.Plane)) *pipeline.Item {
	random := rand.New(rand.NewPCG(seed, 2))
	corrected := raster.NewPlane(side, side)
	for i := range corrected.Pix {
		corrected.Pix[i] = float32(20 + 1.5*random.NormFloat64())
	}
	shape(corrected)
	var spans []raster.Span
	for y := range side {
		if d := 300*300 - (y-320)*(y-320); d > 0 {
			r := int(math.Sqrt(float64(d)))
			spans = append(spans, raster.Span{Y: y, X0: 320 - r, X1: 320 + r})
		}
	}
	zone := pipeline.Zone{Name: "clear", Spans: spans, EdgeDistancePx: func(x, y float64) float64 { return 300 - math.Hypot(x-320, y-320) }}
	it := &pipeline.Item{View: "ring", Geometry: pipeline.Planar{OriginX: 320, OriginY: 320, UMPerPx: 10},
		Region: pipeline.NewRegion(side, side, 320, 320, 300, []pipeline.Zone{zone})}
	it.SetPlane(pipeline.CorrectedPlane, "DN", corrected)
	return it
}

// line adds a scratch with a Gaussian profile of sigma 0.7 px and the given height.
func line(p *raster.Plane, x0, y0, x1, y1, height float64) {
	length := math.Hypot(x1-x0, y1-y0)
	dx, dy := (x1-x0)/length, (y1-y0)/length
	for i := range p.Pix {
		u, v := float64(i%side)-x0, float64(i/side)-y0
		if along, off := u*dx+v*dy, v*dx-u*dy; along >= 0 && along <= length && math.Abs(off) < 5 {
			p.Pix[i] += float32(height * math.Exp(-off*off/(2*0.7*0.7)))
		}
	}
}

func spot(p *raster.Plane, x, y, sigma, height float64) {
	for i := range p.Pix {
		u, v := float64(i%side)-x, float64(i/side)-y
		p.Pix[i] += float32(height * math.Exp(-(u*u+v*v)/(2*sigma*sigma)))
	}
}

// run passes the item through the stages given, the last with changed settings.
func run(t *testing.T, it *pipeline.Item, change func(*Settings), before ...pipeline.Factory) []pipeline.Defect {
	t.Helper()
	for _, f := range append(append([]pipeline.Factory{darkfield.Factory}, before...), Factory) {
		stage, _, err := f.New(func(dst any) error {
			if s, ok := dst.(*Settings); ok && change != nil {
				change(s)
			}
			return nil
		}, pipeline.Environment{})
		if err != nil {
			t.Fatal(err)
		}
		if err := stage.Run(context.Background(), it); err != nil {
			t.Fatal(err)
		}
	}
	return it.Defects
}

// A scratch whose pixels stand out by one sigma, 10 µm/px: the blobs see nothing of it.
func TestFaintScratchIsADefect(t *testing.T) {
	it := item(1, func(p *raster.Plane) { line(p, 150, 200, 450, 330, 1.5) })
	d := run(t, it, nil, blobs.Factory)
	if len(d) != 1 {
		t.Fatalf("%d defects, want 1: %+v", len(d), d)
	}
	g := d[0]
	near := func(name string, got, want, tolerance float64) {
		if math.Abs(got-want) > tolerance {
			t.Errorf("%s: got %g, want %g ± %g", name, got, want, tolerance)
		}
	}
	length := math.Hypot(300, 130)
	near("length", g.LengthUM, 10*length, 100)
	near("width", g.WidthUM, 10*2.3548*0.7, 8)
	near("x", g.XPx, 300, 4)
	near("y", g.YPx, 265, 4)
	near("u", g.UUM, -200, 40)
	near("angle", g.AngleDeg, math.Atan2(130, 300)*180/math.Pi, 0.3)
	near("height", g.PeakDN, 1.4, 0.5)
	near("flux", g.Flux, 1.5*0.7*math.Sqrt(2*math.Pi)*length, 200)
	near("edge distance", g.EdgeDistanceUM, 10*(300-math.Hypot(20, 55)), 40)
	if g.Kind != pipeline.Scratch || g.View != "ring" || g.Zone != "clear" || g.Dark || g.Saturated || len(g.Path) < 2 || g.SNR < 7 || g.PeakSigma <= 0 {
		t.Errorf("got %+v", g)
	}
	if half := run(t, item(1, func(p *raster.Plane) { line(p, 150, 200, 450, 330, 1.5) }), func(s *Settings) { s.Resolution = Half }); len(half) != 1 {
		t.Errorf("half resolution: %d defects, want 1", len(half))
	}
}

// What both stages saw is one defect: a strong scratch stays the blob's, a scratch of
// which the blobs saw pieces becomes one line, and a dig beside or upon it stays a dig.
func TestOneDefectForEachScratch(t *testing.T) {
	strong := run(t, item(2, func(p *raster.Plane) { line(p, 150, 200, 450, 330, 30) }), nil, blobs.Factory)
	if len(strong) != 1 || strong[0].Kind != pipeline.Scratch || math.Abs(strong[0].LengthPx-327) > 4 || strong[0].AreaPx < 600 {
		t.Errorf("strong: %+v", strong)
	}
	broken := func(p *raster.Plane) {
		for x := 140.; x < 470; x += 55 { // strong pieces on a faint line
			line(p, x, 300, x+25, 300, 9)
		}
		line(p, 130, 300, 490, 300, 2)
	}
	seen := run(t, item(3, broken), func(s *Settings) { s.LineSigma = 900 }, blobs.Factory)
	if len(seen) < 4 {
		t.Fatalf("the blobs see %d pieces, want at least 4", len(seen))
	}
	one := run(t, item(3, broken), nil, blobs.Factory)
	if len(one) != 1 || math.Abs(one[0].LengthPx-360) > 12 || one[0].PeakSigma < 8 {
		t.Errorf("broken: %d defects, first %+v", len(one), one[0])
	}
	withDigs := run(t, item(4, func(p *raster.Plane) {
		line(p, 130, 300, 490, 300, 2)
		spot(p, 250, 300, 4, 60)
		spot(p, 400, 330, 2, 60)
	}), nil, blobs.Factory)
	digs, long := 0, 0
	for _, d := range withDigs {
		if d.Kind == pipeline.Dig {
			digs++
		} else if math.Abs(d.LengthPx-360) < 15 {
			long++
		}
	}
	if digs != 2 || long != 1 || len(withDigs) != 3 {
		t.Errorf("with digs: %+v", withDigs)
	}
}

// Neither digs in a row nor lay nor the light of the rim is a scratch, whether or not the
// blobs were looked for before.
func TestNoScratch(t *testing.T) {
	for name, shape := range map[string]func(p *raster.Plane){
		"nothing": func(*raster.Plane) {},
		"digs": func(p *raster.Plane) {
			for k := range 7 {
				spot(p, 150+50*float64(k), 180+30*float64(k), 1.5, 40)
			}
		},
		"large dig": func(p *raster.Plane) { spot(p, 300, 300, 12, 80) },
		"straight lay": func(p *raster.Plane) {
			for i := range p.Pix {
				p.Pix[i] += float32(1.5 * math.Sin(2*math.Pi*(0.6*float64(i%side)+0.8*float64(i/side))/7))
			}
		},
		"concentric lay": func(p *raster.Plane) {
			for i := range p.Pix {
				p.Pix[i] += float32(1.5 * math.Sin(2*math.Pi*math.Hypot(float64(i%side)-320, float64(i/side)-320)/8))
			}
		},
		"rim": func(p *raster.Plane) {
			for i := range p.Pix {
				if d := 300 - math.Hypot(float64(i%side)-320, float64(i/side)-320); d < 3 {
					p.Pix[i] += float32(6 * (3 - max(d, -3)))
				}
			}
		},
	} {
		if d := run(t, item(5, shape), func(s *Settings) { s.Polarity = Both }); len(d) > 0 {
			t.Errorf("%s: %+v", name, d)
		}
		for _, d := range run(t, item(5, shape), nil, blobs.Factory) {
			if d.Kind == pipeline.Scratch && d.SNR < 100 { // the rim itself is a blob
				t.Errorf("%s, after blobs: %+v", name, d)
			}
		}
	}
}

func TestLayIsMeasured(t *testing.T) {
	it := item(6, func(p *raster.Plane) {
		for i := range p.Pix {
			p.Pix[i] += float32(1.5 * math.Sin(2*math.Pi*(0.6*float64(i%side)+0.8*float64(i/side))/7))
		}
	})
	run(t, it, nil)
	angle, known := it.Number("lay_angle_deg")
	period, also := it.Number("lay_period_px")
	if want := -math.Atan2(0.6, 0.8) * 180 / math.Pi; !known || !also || math.Abs(angle-want) > 2 || math.Abs(period-7) > 0.3 {
		t.Errorf("lay at %.1f° (%v), %.2f px (%v)", angle, known, period, also)
	}
}

func TestDarkScratch(t *testing.T) {
	shape := func(p *raster.Plane) { line(p, 150, 200, 450, 330, -2) }
	if d := run(t, item(7, shape), nil); len(d) > 0 {
		t.Errorf("bright: %+v", d)
	}
	for _, polarity := range []string{Dark, Both} {
		if d := run(t, item(7, shape), func(s *Settings) { s.Polarity = polarity }); len(d) != 1 || !d[0].Dark || d[0].Flux <= 0 {
			t.Errorf("%s: %+v", polarity, d)
		}
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"polarity":      func(s *Settings) { s.Polarity = "grey" },
		"resolution":    func(s *Settings) { s.Resolution = "" },
		"seed_sigma":    func(s *Settings) { s.SeedSigma = math.NaN() },
		"line_sigma":    func(s *Settings) { s.LineSigma = 3 },
		"min_length_px": func(s *Settings) { s.MinLengthPx = 1 },
		"join_gap_px":   func(s *Settings) { s.JoinGapPx = -1 },
		"rim_px":        func(s *Settings) { s.RimPx = math.Inf(1) },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
	if err := Default.Check(); err != nil {
		t.Error(err)
	}
}

func TestErrorsSayWhatIsMissing(t *testing.T) {
	stage, _, err := Factory.New(nil, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	full := item(8, func(*raster.Plane) {})
	run(t, full, nil)
	for want, change := range map[string]func(*pipeline.Item){
		"no contrast plane": func(i *pipeline.Item) { delete(i.Planes, pipeline.ContrastPlane) },
		"no region":         func(i *pipeline.Item) { i.Region = nil },
		"no geometry":       func(i *pipeline.Item) { i.Geometry = nil },
		"no grid":           func(i *pipeline.Item) { i.Grid = nil },
		"bad pixels":        func(i *pipeline.Item) { i.BadMask = raster.NewMask(3, 3) },
	} {
		it := full.Fork()
		change(it)
		if err := stage.Run(context.Background(), it); err == nil || !strings.Contains(err.Error(), want) || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: got %v", want, err)
		}
	}
}
