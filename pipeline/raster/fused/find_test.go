package fused

import (
	"math"
	"reflect"
	"strings"
	"sync"
	"testing"

	"lapgate/pipeline/raster"
)

// How far the grid may be from the reference's: level in sigmas, noise as a share. The
// level is a mean of as many pixels; the noise rests on 256 samples of the filtered
// picture a cell, of which one that crosses the clip moves it by 1.5 %.
const (
	levelOff = 0.03
	noiseOff = 0.04
)

var looks = map[string]look{
	"Mono8":            {format: raster.Mono8, noise: 1.6, digs: 60, scratches: 8, seed: 1},
	"no calibration":   {format: raster.Mono8, noise: 1.6, digs: 60, scratches: 8, seed: 2, plain: true},
	"disc with a hole": {format: raster.Mono8, noise: 1.6, digs: 60, scratches: 8, seed: 3, circle: true},
	"lay":              {format: raster.Mono8, noise: 1.6, lay: 3, digs: 90, scratches: 8, seed: 3},
	"dark defects":     {format: raster.Mono8, noise: 1.6, digs: 60, scratches: 8, seed: 4, dark: true},
	"Mono10":           {format: raster.Mono10, noise: 1, digs: 60, scratches: 4, seed: 12},
	"Mono12":           {format: raster.Mono12, noise: 1.6, digs: 60, scratches: 8, seed: 5},
	"quiet Mono12":     {format: raster.Mono12, noise: 0.12, digs: 60, scratches: 4, seed: 5},
	"Mono10p":          {format: raster.Mono10p, noise: 1.6, digs: 60, scratches: 8, seed: 6},
	"Mono12p":          {format: raster.Mono12p, noise: 1.6, digs: 60, scratches: 8, seed: 8},
	"Mono12Packed":     {format: raster.Mono12Packed, noise: 1.6, digs: 40, scratches: 4, seed: 9, plain: true},
	"Mono16":           {format: raster.Mono16, noise: 1.6, digs: 60, scratches: 8, seed: 7},
}

func find(t *testing.T, l look, s scene, set Settings) *Result {
	t.Helper()
	c, err := NewCorrection(l.format, l.width, l.height, s.planes)
	if err != nil {
		t.Fatal(err)
	}
	r, err := c.Find(s.raw, s.mask.Spans(), set)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestSameAsReference(t *testing.T) {
	for name, l := range looks {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			l.width, l.height = 803, 522
			s, set := draw(l), usual()
			if l.dark {
				set.Polarity = Dark
			}
			want, spans, grid, snr := reference(s, set)
			set.SNR = true
			got := find(t, l, s, set)
			compareGrids(t, got.Grid, grid)
			comparePlanes(t, got.SNR, snr)
			compareBlobs(t, got.Blobs, want, spans, set)
		})
	}
}

// Haze with crests over single cells is followed as in the reference, or the crests would
// stand out as blobs.
func TestLevelFollowsHaze(t *testing.T) {
	l := look{format: raster.Mono8, noise: 1.6, haze: 1.6, seed: 13, width: 803, height: 522}
	s := draw(l)
	_, _, want, _ := reference(s, usual())
	got := find(t, l, s, usual()).Grid
	for i, level := range want.Level {
		if math.Abs(got.Level[i]-level) > levelOff*want.Noise[i] {
			t.Errorf("cell %d: level %.4f, want %.4f", i, got.Level[i], level)
		}
	}
}

func compareGrids(t *testing.T, got, want *raster.Grid) {
	for i := range want.Level {
		if got.Inside[i] != want.Inside[i] || got.Valid[i] != want.Valid[i] || got.Filled[i] != want.Filled[i] {
			t.Fatalf("cell %d: %d inside, %d valid, filled %v; want %d, %d, %v", i, got.Inside[i], got.Valid[i], got.Filled[i],
				want.Inside[i], want.Valid[i], want.Filled[i])
		}
		if want.Inside[i] == 0 {
			continue
		}
		if math.Abs(got.Level[i]-want.Level[i]) > levelOff*want.Noise[i] || math.Abs(got.Noise[i]/want.Noise[i]-1) > noiseOff {
			t.Errorf("cell %d: level %.4f noise %.4f DN, want %.4f and %.4f", i, got.Level[i], got.Noise[i], want.Level[i], want.Noise[i])
		}
	}
}

func comparePlanes(t *testing.T, got, want *raster.Plane) {
	for i, v := range want.Pix {
		if math.Abs(float64(got.Pix[i]-v)) > 0.06*max(3, math.Abs(float64(v))) {
			t.Fatalf("snr at (%d, %d): got %g, want %g", i%want.Width, i/want.Width, got.Pix[i], v)
		}
	}
}

// compareBlobs finds every blob of one list in the other, but for peaks within 2 % of the
// threshold, and holds the measures of those with the same pixels against each other.
func compareBlobs(t *testing.T, got []Blob, want []raster.Blemish, spans [][]raster.Span, set Settings) {
	t.Helper()
	lists := [2][]Blob{got, nil}
	for i, w := range want {
		lists[1] = append(lists[1], Blob{w, spans[i]})
	}
	same, off := 0, 0
	for k, list := range lists {
		for _, b := range list {
			i := overlapping(b, lists[1-k])
			if i < 0 && math.Abs(b.PeakSNR/set.High-1) > 0.02 {
				t.Errorf("blob at (%.1f, %.1f) with peak %.3f only in %s", b.X, b.Y, b.PeakSNR, []string{"the fused list", "the reference"}[k])
			}
			if k == 0 && i >= 0 && reflect.DeepEqual(b.Spans, spans[i]) {
				same++
				off += compareMeasures(t, b.Blemish, want[i])
			}
		}
	}
	if off > 1+same/25 {
		t.Errorf("%d of %d blobs with the same pixels are measured otherwise", off, same)
	}
	if same < 10 || float64(same) < 0.75*float64(len(want)) {
		t.Errorf("%d of %d blobs have the same pixels, want three quarters", same, len(want))
	}
}

func overlapping(b Blob, list []Blob) int {
	for i, o := range list {
		if o.X0 < b.X1 && b.X0 < o.X1 && o.Y0 < b.Y1 && b.Y0 < o.Y1 && touch(b.Spans, o.Spans) {
			return i
		}
	}
	return -1
}

func touch(a, b []raster.Span) bool {
	for _, p := range a {
		for _, q := range b {
			if p.Y == q.Y && p.X0 < q.X1 && q.X0 < p.X1 {
				return true
			}
		}
	}
	return false
}

// compareMeasures returns 1 where a size differs by more than 2 %: region and height of a
// plateau are found in turn, and a few blobs stand where another level by a hundredth of a
// sigma leads to another pair.
func compareMeasures(t *testing.T, got, want raster.Blemish) int {
	t.Helper()
	if math.Hypot(got.X-want.X, got.Y-want.Y) > 0.1 {
		t.Errorf("blob of %d px at (%.3f, %.3f), want (%.3f, %.3f)", want.AreaPx, got.X, got.Y, want.X, want.Y)
	}
	if got.AreaPx != want.AreaPx || got.Dark != want.Dark || got.PeakX != want.PeakX || got.PeakY != want.PeakY ||
		math.Abs(got.Flux-want.Flux) > 0.03*want.Flux {
		t.Errorf("blob at (%.1f, %.1f): %+v, want %+v", want.X, want.Y, got, want)
	}
	for name, v := range map[string][2]float64{"diameter": {got.Diameter, want.Diameter}, "length": {got.Length, want.Length},
		"width": {got.Width, want.Width}, "height": {got.Height, want.Height}} {
		if math.Abs(v[0]-v[1]) > 0.02*v[1] {
			t.Logf("blob of %d px at (%.1f, %.1f): %s %.4f, want %.4f", want.AreaPx, want.X, want.Y, name, v[0], v[1])
			return 1
		}
	}
	if got.Long != want.Long || got.Coiled != want.Coiled || len(got.Path) != len(want.Path) {
		t.Logf("blob of %d px at (%.1f, %.1f): %+v, want %+v", want.AreaPx, want.X, want.Y, got, want)
		return 1
	}
	return 0
}

func TestBothPolarities(t *testing.T) {
	l := look{format: raster.Mono8, width: 400, height: 300, noise: 1.5, digs: 20, seed: 21}
	s := draw(l)
	for y := 100; y < 106; y++ {
		for x := 200; x < 206; x++ {
			s.raw.Data[y*s.raw.Stride+x] -= 14 // a dark spot among bright ones
		}
	}
	set := usual()
	set.Polarity = Both
	want, spans, _, _ := reference(s, set)
	got := find(t, l, s, set)
	compareBlobs(t, got.Blobs, want, spans, set)
	dark := 0
	for _, b := range got.Blobs {
		if b.Dark {
			dark++
		}
	}
	if dark == 0 {
		t.Error("the dark spot was not found")
	}
}

func TestBandsHaveNoSeams(t *testing.T) {
	for _, name := range []string{"Mono8", "Mono12p", "Mono16", "disc with a hole"} {
		l := looks[name]
		l.width, l.height = 500, 710
		s, set := draw(l), usual()
		one := find(t, l, s, set)
		for _, n := range []int{2, 3, 7, 40} {
			set.Bands = n
			many := find(t, l, s, set)
			if !reflect.DeepEqual(one.Blobs, many.Blobs) || !reflect.DeepEqual(one.Grid, many.Grid) || !reflect.DeepEqual(one.Saturated, many.Saturated) {
				t.Errorf("%s: %d bands give another result than one", name, n)
			}
		}
	}
}

func TestConcurrentCalls(t *testing.T) {
	l := looks["Mono8"]
	l.width, l.height = 300, 260
	s, set := draw(l), usual()
	c, err := NewCorrection(l.format, l.width, l.height, s.planes)
	if err != nil {
		t.Fatal(err)
	}
	first, err := c.Find(s.raw, Whole(300, 260), set)
	if err != nil {
		t.Fatal(err)
	}
	var wait sync.WaitGroup
	for k := range 8 {
		wait.Go(func() {
			set := set
			set.Bands = 1 + k%3
			if r, err := c.Find(s.raw, Whole(300, 260), set); err != nil || !reflect.DeepEqual(r.Blobs, first.Blobs) {
				t.Errorf("call %d: other blobs, %v", k, err)
			}
		})
	}
	wait.Wait()
}

func TestOddSizes(t *testing.T) {
	for _, size := range [][2]int{{1, 1}, {4, 3}, {7, 64}, {65, 2}, {64, 64}, {31, 129}, {130, 66}} {
		for _, format := range raster.PixelFormats() {
			l := look{format: format, width: size[0], height: size[1], noise: 1.6, digs: 1, seed: 3}
			s, set := draw(l), usual()
			want, spans, grid, _ := reference(s, set)
			set.Bands = 2
			got := find(t, l, s, set)
			compareGrids(t, got.Grid, grid)
			for _, b := range got.Blobs {
				var ref []Blob
				for i := range want {
					ref = append(ref, Blob{want[i], spans[i]})
				}
				if overlapping(b, ref) < 0 && b.PeakSNR > 1.02*set.High {
					t.Errorf("%v %v: blob at (%.1f, %.1f) only in the fused list", size, format, b.X, b.Y)
				}
			}
		}
	}
}

func TestEmptyRegion(t *testing.T) {
	l := look{format: raster.Mono8, width: 200, height: 150, noise: 1.6, digs: 5, seed: 3}
	s := draw(l)
	s.mask = raster.NewMask(200, 150)
	r := find(t, l, s, usual())
	if len(r.Blobs) != 0 || r.Grid.Inside[0] != 0 {
		t.Errorf("found %d blobs outside the region", len(r.Blobs))
	}
}

func TestStrongestAreKept(t *testing.T) {
	l := look{format: raster.Mono8, width: 500, height: 400, noise: 1.6, digs: 40, seed: 5}
	s, set := draw(l), usual()
	all := find(t, l, s, set)
	set.MaxBlobs = 5
	few := find(t, l, s, set)
	if all.Truncated || !few.Truncated || len(few.Blobs) != 5 {
		t.Fatalf("%d of %d kept, truncated %v", len(few.Blobs), len(all.Blobs), few.Truncated)
	}
	stronger := 0
	for _, a := range all.Blobs {
		if a.PeakSNR > few.Blobs[0].PeakSNR && a.PeakSNR > few.Blobs[1].PeakSNR && a.PeakSNR > few.Blobs[2].PeakSNR && a.PeakSNR > few.Blobs[3].PeakSNR && a.PeakSNR > few.Blobs[4].PeakSNR {
			stronger++
		}
	}
	if stronger > 0 {
		t.Errorf("%d stronger blobs were dropped", stronger)
	}
}

func TestSaturatedPixels(t *testing.T) {
	l := look{format: raster.Mono12, width: 200, height: 150, noise: 1.6, plain: true, seed: 3}
	s := draw(l)
	for x := 50; x < 53; x++ {
		s.raw.Data[70*s.raw.Stride+2*x], s.raw.Data[70*s.raw.Stride+2*x+1] = 0xff, 0x0f
	}
	r := find(t, l, s, usual())
	if want := []raster.Span{{Y: 70, X0: 50, X1: 53}}; !reflect.DeepEqual(r.Saturated, want) {
		t.Errorf("saturated %v, want %v", r.Saturated, want)
	}
}

func TestRefusals(t *testing.T) {
	l := look{format: raster.Mono10, width: 64, height: 48, noise: 1.6, seed: 3}
	s := draw(l)
	c, err := NewCorrection(l.format, l.width, l.height, s.planes)
	if err != nil {
		t.Fatal(err)
	}
	short, high, other := s.raw, s.raw, s.raw
	short.Data = short.Data[:100]
	high.Data = append([]byte(nil), high.Data...)
	high.Data[20*high.Stride+31] = 0xff
	other.Format = raster.Mono12
	bad := usual()
	bad.High = 2
	cell := usual()
	cell.Grid.CellPx = 30
	for want, try := range map[string]func() error{
		"data: got 100 bytes": func() error { _, err := c.Find(short, Whole(64, 48), usual()); return err },
		"at pixel (15, 20)":   func() error { _, err := c.Find(high, Whole(64, 48), usual()); return err },
		"frame: got Mono12":   func() error { _, err := c.Find(other, Whole(64, 48), usual()); return err },
		"thresholds: got":     func() error { _, err := c.Find(s.raw, nil, bad); return err },
		"grid cell: got 30":   func() error { _, err := c.Find(s.raw, nil, cell); return err },
		"dark: got 64 × 48":   func() error { _, err := NewCorrection(l.format, 65, 48, s.planes); return err },
		"response: got 0 at": func() error {
			_, err := NewCorrection(l.format, 9, 9, Planes{Response: raster.NewPlane(9, 9)})
			return err
		},
	} {
		if err := try(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want an error with %q", err, want)
		}
	}
}

// Rows add no memory but for the grid, samples of it, and runs of noise above the threshold.
func TestMemoryGrowsWithTheWidth(t *testing.T) {
	used := func(w, h int) int64 {
		l := look{format: raster.Mono8, width: w, height: h, noise: 1.6, seed: 3}
		return find(t, l, draw(l), usual()).MemoryBytes
	}
	low, high := used(512, 512), used(512, 2048)
	if perPixel := float64(high-low) / (512 * 1536); perPixel > 0.25 {
		t.Errorf("%d bytes for 512 rows, %d for 2048: %.2f bytes a pixel", low, high, perPixel)
	}
}

// The bound reads every byte of the frame, and those of the sampled rows twice.
func TestReadSumsWhatItReads(t *testing.T) {
	raw := raster.NewRaw(raster.Mono8, 64, 64)
	c, err := NewCorrection(raw.Format, 64, 64, Planes{})
	if err != nil {
		t.Fatal(err)
	}
	for y := range 64 {
		raw.Data[64*y] = 1
	}
	if got := c.Read(raw, usual()); got != 64+8 {
		t.Errorf("sum %d, want 72: 64 rows and 8 sampled", got)
	}
}
