package main

import (
	"math"
	"slices"
	"strings"
	"testing"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
)

// twoSides is a frame in which both sides find 80 objects of 3 × 3 px, with peaks of 10.
func twoSides() found {
	snr := raster.NewPlane(400, 400)
	f := found{item: &pipeline.Item{Planes: map[string]pipeline.NamedPlane{pipeline.SNRPlane: {Pixels: snr}}}}
	for i := range 80 {
		x, y := 5+i%20*15, 5+i/20*15
		var spans []raster.Span
		for v := y; v < y+3; v++ {
			spans = append(spans, raster.Span{Y: v, X0: x, X1: x + 3})
			for u := x; u < x+3; u++ {
				snr.Set(u, v, 5)
			}
		}
		snr.Set(x+1, y+1, 10)
		b := thing{raster.Blemish{X: float64(x + 1), Y: float64(y + 1), Diameter: 3, Length: 3, Width: 3, PeakSNR: 10}, spans}
		f.reference = append(f.reference, b)
		b.spans = slices.Clone(b.spans)
		f.fused = append(f.fused, b)
	}
	return f
}

// The check fails for each way in which the pass could differ, and for nothing less.
func TestCheckCanFail(t *testing.T) {
	for name, tc := range map[string]struct {
		spoil func(f *found)
		says  string // in the error; empty = none
	}{
		"the same":               {spoil: func(*found) {}},
		"one missed":             {func(f *found) { f.fused = f.fused[1:] }, "1 × object on one side only"},
		"one too many":           {func(f *found) { f.reference = f.reference[1:] }, "1 × object on one side only"},
		"peak far too low":       {func(f *found) { f.fused[3].PeakSNR = 5.9 }, "1 × object on one side only"},
		"peaks near threshold":   {func(f *found) { f.peaks(5.95, 6.05) }, ""},
		"near k_high but missed": {func(f *found) { f.peaks(6.05, 6.05); f.fused = f.fused[1:] }, "1 × object on one side only"},
		"one faint missed":       {func(f *found) { f.peaks(5, 5); f.fused = f.fused[1:] }, ""},
		"two faint missed":       {func(f *found) { f.peaks(5, 5); f.fused = f.fused[2:] }, "2 × thing below k_high"},
		"faint ones near k_low":  {func(f *found) { f.peaks(3.56, 3.56); f.fused = f.fused[9:] }, ""},
		"one centre off":         {func(f *found) { f.fused[3].X += 0.11 }, "1 × centres"},
		"centre just within":     {func(f *found) { f.fused[3].X += 0.099 }, ""},
		"no number":              {func(f *found) { f.fused[3].Y = math.NaN() }, "1 × centres"},
		"one width off":          {func(f *found) { f.fused[3].Width *= 1.021 }, ""},
		"two widths off":         {func(f *found) { f.fused[3].Width *= 1.021; f.fused[9].Width *= 0.979 }, "2 × sizes"},
		"no size":                {func(f *found) { f.fused[3].Width = math.NaN(); f.fused[4].Length = math.Inf(1) }, "2 × sizes"},
		"pixels too many":        {func(f *found) { f.widen(3, 3.6) }, "3 of 80 objects have other pixels"},
		"pixels near k_low":      {func(f *found) { f.widen(30, 3.44) }, ""},
		"in pieces":              {func(f *found) { f.cut(1, 1) }, ""},
		"torn at 5 to 10 sigmas": {func(f *found) { f.cut(1, 2) }, "1 × object on one side only"},
		"too few to say":         {func(f *found) { f.fused, f.reference = f.fused[:59], f.reference[:59] }, "want at least 60"},
	} {
		t.Run(name, func(t *testing.T) {
			f := twoSides()
			tc.spoil(&f)
			s := tally{surface: "test"}
			s.add(f)
			err := s.check()
			if (err != nil) != (tc.says != "") || err != nil && !strings.Contains(err.Error(), tc.says) {
				t.Errorf("error %v, want %q in it (%s)", err, tc.says, s)
			}
		})
	}
}

// peaks gives the first 20 objects other peaks on either side.
func (f *found) peaks(fused, reference float64) {
	for i := range 20 {
		f.fused[i].PeakSNR, f.reference[i].PeakSNR = fused, reference
	}
}

// widen gives one pixel more, of this snr, to the first n objects of the pass.
func (f *found) widen(n int, snr float32) {
	for _, b := range f.fused[:n] {
		s := &b.spans[0]
		s.X1++
		f.item.Planes[pipeline.SNRPlane].Pixels.Set(s.X1-1, s.Y, snr)
	}
}

// cut makes the upper row of the first n objects of the pass an object of its own, and
// leaves the rows from next on to the object.
func (f *found) cut(n, next int) {
	for i := range n {
		b := f.fused[i]
		f.fused[i].spans = b.spans[next:]
		b.spans = b.spans[:1]
		f.fused = append(f.fused, b)
	}
}

// One unit with lay through both, as the command does it.
func TestPassAndReferenceAgree(t *testing.T) {
	scene, _, err := configs.Load[render.Scene]("../../testdata/scenes/detect.yaml")
	if err != nil {
		t.Fatal(err)
	}
	doc := document{}
	if err := doc.add(t.TempDir(), surfaces()[2], scene, 1); err != nil {
		t.Fatal(err)
	}
	if err := doc.judge(); err != nil {
		t.Error(err)
	}
	if f := doc.Frames[0]; len(f.Fused) < 100 || len(f.Objects) < 100 || f.Fused[0].PeakX == 0 {
		t.Errorf("%d and %d objects written", len(f.Fused), len(f.Objects))
	}
}
