package detect

import (
	"context"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/flatfield"
)

const width, height = 700, 500

// sight is a disc in a frame: digs and scratches on haze, with lay of an amplitude in DN.
func sight(lay float64, seed uint64) (*pipeline.Item, *pipeline.Calibration) {
	random := rand.New(rand.NewPCG(seed, 3))
	light := make([]float64, width*height)
	for i := range light {
		x, y := float64(i%width), float64(i/width)
		light[i] = 20 + 6*math.Cos(x/300) + 3*math.Sin(y/200) + lay*math.Sin(2*math.Pi*(0.6*x+0.8*y)/9)
	}
	for range 70 {
		add(light, random.Float64()*width, random.Float64()*height, 0.8+2*random.Float64(), 3*math.Exp(3*random.Float64()))
	}
	for range 6 {
		x, y, a := random.Float64()*width, random.Float64()*height, 7*random.Float64()
		for t := 0.; t < 90; t += 0.5 {
			add(light, x+t*math.Cos(a), y+t*math.Sin(a), 1, 4)
		}
	}
	c := &pipeline.Calibration{Dark: raster.NewPlane(width, height), Response: raster.NewPlane(width, height),
		Capture: pipeline.Capture{Format: raster.Mono8, Width: width, Height: height}}
	raw := raster.NewRaw(raster.Mono8, width, height)
	for i, v := range light {
		c.Dark.Pix[i], c.Response.Pix[i] = float32(4+0.5*random.NormFloat64()), float32(1+0.02*random.NormFloat64())
		v = v*float64(c.Response.Pix[i]) + float64(c.Dark.Pix[i]) + 1.6*random.NormFloat64()
		raw.Data[i] = byte(min(max(math.Round(v), 0), 255))
	}
	for range 300 {
		p := pipeline.PixelAt{X: random.IntN(width), Y: random.IntN(height)}
		c.BadPixels, raw.Data[p.Y*width+p.X] = append(c.BadPixels, p), 255
	}
	c.Response.Pix[250*width+350] = 0.01 // below min_response: bad as well
	for x := 340; x < 344; x++ {
		raw.Data[260*width+x] = 255
	}
	return item(raw), c
}

func add(light []float64, x, y, sigma, peak float64) {
	for v := max(int(y)-9, 0); v <= min(int(y)+9, height-1); v++ {
		for u := max(int(x)-9, 0); u <= min(int(x)+9, width-1); u++ {
			light[v*width+u] += peak * math.Exp(-((float64(u)-x)*(float64(u)-x)+(float64(v)-y)*(float64(v)-y))/(2*sigma*sigma))
		}
	}
}

func item(raw raster.Raw) *pipeline.Item {
	var all, inner []raster.Span
	for y := range height {
		if d := 240*240 - (y-250)*(y-250); d > 0 {
			r := int(math.Sqrt(float64(d)))
			all = append(all, raster.Span{Y: y, X0: 350 - r, X1: 350 + r})
			inner = append(inner, raster.Span{Y: y, X0: 350 - r/2, X1: 350 + r/2})
		}
	}
	zones := []pipeline.Zone{{Name: "inner", Spans: inner}, {Name: "all", Spans: all,
		EdgeDistancePx: func(x, y float64) float64 { return 240 - math.Hypot(x-350, y-250) }}}
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{OriginX: 350, OriginY: 250, UMPerPx: 10},
		Region: pipeline.NewRegion(width, height, 350, 250, 240, zones)}
}

// row makes the three stages, or the one that a fuser makes of them.
func row(t *testing.T, c *pipeline.Calibration, fusers []pipeline.Fuser, needed map[string]bool, dark darkfield.Settings) []pipeline.Stage {
	t.Helper()
	env := pipeline.Environment{View: "ring", Calibration: c}
	var stages []pipeline.Stage
	var settings []any
	for _, f := range []pipeline.Factory{flatfield.Factory, darkfield.Factory, blobs.Factory} {
		s, set, err := f.New(func(dst any) error {
			if d, ok := dst.(*darkfield.Settings); ok {
				*d = dark
			}
			return nil
		}, env)
		if err != nil {
			t.Fatal(err)
		}
		stages, settings = append(stages, s), append(settings, set)
	}
	if len(fusers) == 0 {
		return stages
	}
	s, err := fusers[0].New(settings, env, needed)
	if err != nil || s == nil {
		t.Fatalf("no fused stage: %v", err)
	}
	return []pipeline.Stage{s}
}

func run(t *testing.T, stages []pipeline.Stage, it *pipeline.Item, c *pipeline.Calibration) *pipeline.Item {
	t.Helper()
	it = it.Fork()
	it.Calibration = c
	for _, s := range stages {
		if err := s.Run(context.Background(), it); err != nil {
			t.Fatal(err)
		}
	}
	return it
}

// The defects of the row and of the pass are the same, but for peaks within 2 % of the
// threshold; places agree to 0.1 px and sizes to 2 % where the pixels are the same.
func TestSameAsTheRow(t *testing.T) {
	for name, lay := range map[string]float64{"haze": 0, "lay": 2.5} {
		t.Run(name, func(t *testing.T) {
			it, c := sight(lay, 5)
			dark := darkfield.Default
			dark.MaxNoiseDN, dark.MaxBackgroundDN = 1, 500
			want := run(t, row(t, c, nil, nil, dark), it, c)
			got := run(t, row(t, c, []pipeline.Fuser{Fuser()}, nil, dark), it, c)
			compareDefects(t, got.Defects, want.Defects)
			compareRest(t, got, want)
			if len(got.Planes) != 0 {
				t.Errorf("%d planes were written that nobody reads", len(got.Planes))
			}
		})
	}
}

// The plane of contrast is written for a stage that reads it, and is that of the row to
// half a step of the integers in which counts are corrected, and half a per cent.
func TestContrastForAReader(t *testing.T) {
	it, c := sight(0, 5)
	needed := map[string]bool{pipeline.ContrastPlane: true}
	want := run(t, row(t, c, nil, nil, darkfield.Default), it, c).Planes[pipeline.ContrastPlane]
	got := run(t, row(t, c, []pipeline.Fuser{Fuser()}, needed, darkfield.Default), it, c).Planes[pipeline.ContrastPlane]
	if got.Pixels == nil || got.Unit != want.Unit {
		t.Fatalf("got %+v", got)
	}
	for i, v := range got.Pixels.Pix {
		if w := want.Pixels.Pix[i]; math.Abs(float64(v-w)) > 0.05+0.005*math.Abs(float64(w)) {
			t.Fatalf("(%d, %d): got %g, want %g", i%width, i/width, v, want.Pixels.Pix[i])
		}
	}
}

func compareDefects(t *testing.T, got, want []pipeline.Defect) {
	t.Helper()
	at := map[pipeline.Box]pipeline.Defect{}
	for _, d := range want {
		at[d.Box] = d
	}
	same, off := 0, 0
	for _, g := range got {
		w, ok := at[g.Box]
		if !ok || w.AreaPx != g.AreaPx {
			continue
		}
		same++
		if math.Hypot(g.XPx-w.XPx, g.YPx-w.YPx) > 0.1 || g.Zone != w.Zone || g.Saturated != w.Saturated || g.View != w.View {
			t.Errorf("got %+v, want %+v", g, w)
		}
		if g.Kind != w.Kind || math.Abs(g.DiameterUM-w.DiameterUM) > 0.02*w.DiameterUM || math.Abs(g.LengthUM-w.LengthUM) > 0.02*w.LengthUM || math.Abs(g.EdgeDistanceUM-w.EdgeDistanceUM) > 1 {
			off++ // see compareMeasures in package fused
		}
	}
	if missing(got, want) > 0 || missing(want, got) > 0 || off > 1+same/25 || same < 3*len(want)/4 || same < 10 {
		t.Errorf("%d defects (%d extra), want %d (%d missing); %d have the same pixels, %d of those another size", len(got), missing(got, want), len(want), missing(want, got), same, off)
	}
}

// missing counts the defects of one list that no defect of the other overlaps, but for
// those whose peak is within 2 % of the threshold.
func missing(list, other []pipeline.Defect) int {
	n := 0
	for _, d := range list {
		if d.PeakSigma > 1.02*blobs.Default.KHigh && !slices.ContainsFunc(other, func(o pipeline.Defect) bool {
			return o.Box.X0 < d.Box.X1 && d.Box.X0 < o.Box.X1 && o.Box.Y0 < d.Box.Y1 && d.Box.Y0 < o.Box.Y1
		}) {
			n++
		}
	}
	return n
}

func compareRest(t *testing.T, got, want *pipeline.Item) {
	t.Helper()
	g, w := got.Coverage, want.Coverage
	if g.Share != w.Share || g.MaskedPx != w.MaskedPx || g.SaturatedPx != w.SaturatedPx || math.Abs(g.Background-w.Background) > 0.05 || math.Abs(g.Noise-w.Noise) > 0.01*w.Noise {
		t.Errorf("coverage %+v, want %+v", g, w)
	}
	if len(got.Proofs) != len(want.Proofs) || len(got.Measurements) != len(want.Measurements) || got.Grid == nil {
		t.Fatalf("proofs %+v measurements %+v, want %+v and %+v", got.Proofs, got.Measurements, want.Proofs, want.Measurements)
	}
	for i, p := range want.Proofs {
		if q := got.Proofs[i]; q.Name != p.Name || q.OK != p.OK || math.Abs(q.Value-p.Value) > 0.03*p.Value {
			t.Errorf("proof %+v, want %+v", q, p)
		}
	}
	for i, m := range want.Measurements {
		if q := got.Measurements[i]; q.Name != m.Name || q.Unit != m.Unit || math.Abs(q.Value-m.Value) > 0.01*m.Value {
			t.Errorf("measurement %+v, want %+v", q, m)
		}
	}
	if !reflect.DeepEqual(got.BadMask, want.BadMask) {
		t.Error("other bad pixels")
	}
	for y := range height {
		for x := range width {
			if want.Region.Mask().At(x, y) && got.SaturatedAt.At(x, y) != want.SaturatedAt.At(x, y) {
				t.Fatalf("saturated at (%d, %d): %v", x, y, got.SaturatedAt.At(x, y))
			}
		}
	}
}

func TestPlanesThatAreRead(t *testing.T) {
	it, c := sight(0, 6)
	want := run(t, row(t, c, nil, nil, darkfield.Default), it, c)
	got := run(t, row(t, c, []pipeline.Fuser{Fuser()}, map[string]bool{pipeline.SNRPlane: true, pipeline.NoisePlane: true}, darkfield.Default), it, c)
	for _, name := range []string{pipeline.SNRPlane, pipeline.NoisePlane, pipeline.BackgroundPlane} {
		p, err := got.Plane(name)
		if err != nil {
			t.Fatal(err)
		}
		q, _ := want.Plane(name)
		for i, v := range q.Pix {
			if want.Region.Mask().Bits[i] && math.Abs(float64(p.Pix[i]-v)) > 0.06*max(1, math.Abs(float64(v))) {
				t.Fatalf("%s at (%d, %d): %g, want %g", name, i%width, i/width, p.Pix[i], v)
			}
		}
	}
}

func TestWithoutCalibrationAndWithoutRegion(t *testing.T) {
	it, _ := sight(0, 7)
	want := run(t, row(t, nil, nil, nil, darkfield.Default), it, nil)
	stages := row(t, nil, []pipeline.Fuser{Fuser()}, nil, darkfield.Default)
	got := run(t, stages, it, nil)
	if missing(got.Defects, want.Defects)+missing(want.Defects, got.Defects) > 0 || len(want.Defects) < 20 || got.BadMask != nil || got.Coverage.Share != want.Coverage.Share {
		t.Errorf("%d defects, coverage %v; want %d and %v", len(got.Defects), got.Coverage.Share, len(want.Defects), want.Coverage.Share)
	}
	it.Region = pipeline.NewRegion(width, height, 0, 0, 0, nil)
	if empty := run(t, stages, it, nil); len(empty.Defects) != 0 || empty.Coverage.Share != 0 {
		t.Errorf("an empty region: %d defects, coverage %v", len(empty.Defects), empty.Coverage.Share)
	}
	it.Region = nil
	if err := stages[0].Run(context.Background(), it); err == nil {
		t.Error("no region was accepted")
	}
}

func TestWhatStaysApart(t *testing.T) {
	settings := []any{flatfield.Default, darkfield.Settings{GridPx: 50, Polarity: darkfield.Bright}, blobs.Default}
	if s, err := Fuser().New(settings, pipeline.Environment{}, nil); s != nil || err != nil {
		t.Errorf("cells of 50 px: got %v, %v, want the row to stay", s, err)
	}
}
