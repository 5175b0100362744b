package outside

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/stagetest"
)

var update = flag.Bool("update", false, "rewrite the demo frames")

// TestTexture shares one process: a Python program takes its time to start.
func TestTexture(t *testing.T) {
	t.Parallel()
	h := texture(t)
	for name, test := range map[string]func(*testing.T, *Host){"of a wave": textureOfAWave, "orange peel": textureMarksOrangePeel,
		"conforms": textureConforms, "holds": textureHoldsWhatItCannotSee} {
		t.Run(name, func(t *testing.T) { test(t, h) })
	}
}

func texture(t *testing.T) *Host {
	t.Helper()
	s := pythonStage(t, "")
	path, err := filepath.Abs("python/texture.py")
	if err != nil {
		t.Fatal(err)
	}
	s.Name, s.Path, s.SlotBytes = "texture", path, 64<<20
	return open(t, s)
}

// surface is a frame of 512 × 384 px at 10 µm/px: level 100 DN with white noise of
// sigma DN, and what shape adds at (x, y).
func surface(sigma float64, shape func(x, y float64) float64) *pipeline.Item {
	const w, h = 512, 384
	random := rand.New(rand.NewPCG(4, 5))
	counts := make([]uint16, w*h)
	for i := range counts {
		counts[i] = uint16(math.Round(16 * (100 + sigma*random.NormFloat64() + shape(float64(i%w), float64(i/w)))))
	}
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raster.Pack(raster.Mono12, counts, w, h)}}, Geometry: pipeline.Planar{UMPerPx: 10}}
}

const textureSettings = `{"tile_px":128,"lay_min_um":40,"lay_max_um":250,"peel_min_um":250,"peel_max_um":1000,"max_lay_percent":0,"max_peel_percent":0}`

// A plane wave A·cos(k·r) has the root mean square A/√2 and one direction; counts are in
// sixteenths of a DN here. Waves of one band do not show in the other.
func textureOfAWave(t *testing.T, h *Host) {
	stage := newStage(t, h.Factory(), textureSettings)
	wave := func(amplitude, wavelengthUM, angleDeg float64) func(x, y float64) float64 {
		s, c := math.Sincos(angleDeg * math.Pi / 180) // the lines run along this angle
		return func(x, y float64) float64 {
			return amplitude * math.Cos(2*math.Pi*(-s*x+c*y)*10/wavelengthUM)
		}
	}
	for _, c := range []struct{ amplitude, wavelengthUM, angleDeg, lay, peel float64 }{
		{4, 100, 30, 4 / math.Sqrt2, 0}, {2, 80, -60, 2 / math.Sqrt2, 0}, {3, 120, 0, 3 / math.Sqrt2, 0}, {3, 500, 0, 0, 3 / math.Sqrt2}, {0, 100, 0, 0, 0},
	} {
		item := surface(1, wave(c.amplitude, c.wavelengthUM, c.angleDeg))
		if err := stage.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
		lay, _ := item.Number("lay_rms_dn")
		peel, _ := item.Number("peel_rms_dn")
		angle, _ := item.Number("lay_angle_deg")
		directed, _ := item.Number("lay_directedness")
		if math.Abs(lay/16-c.lay) > 0.03*c.lay+0.12 || math.Abs(peel/16-c.peel) > 0.03*c.peel+0.12 {
			t.Errorf("%+v: lay %.3f, peel %.3f DN, want %.3f and %.3f", c, lay/16, peel/16, c.lay, c.peel)
		}
		if off := math.Mod(math.Abs(angle-c.angleDeg), 180); c.lay > 0 && (min(off, 180-off) > 1 || directed < 0.9) {
			t.Errorf("%+v: angle %.2f°, directedness %.3f", c, angle, directed)
		}
		if c.amplitude == 0 && directed > 0.5 {
			t.Errorf("white noise has a direction: %.3f", directed)
		}
	}
}

// demoPeel is a surface whose right third has orange peel of about 4 % in the band, and
// lay of 1 DN at 30° everywhere.
func demoPeel() *pipeline.Item {
	random := rand.New(rand.NewPCG(6, 7))
	type tone struct{ kx, ky, phase float64 }
	tones := make([]tone, 24)
	for i := range tones {
		k, a := 2*math.Pi*10/(350+400*random.Float64()), 2*math.Pi*random.Float64()
		tones[i] = tone{k * math.Cos(a), k * math.Sin(a), 2 * math.Pi * random.Float64()}
	}
	return surface(1, func(x, y float64) float64 {
		v := math.Cos(2 * math.Pi * (-0.5*x + 0.866*y) * 10 / 100)
		if x >= 341 {
			for _, t := range tones {
				v += 4 * math.Sqrt(2./24) * math.Cos(t.kx*x+t.ky*y+t.phase)
			}
		}
		return v
	})
}

// Where orange peel passes its limit there is one stain, in the right third; the demo
// frame is that surface.
func textureMarksOrangePeel(t *testing.T, h *Host) {
	item := demoPeel()
	const file = "demo/texture.png"
	if *update {
		plane, err := item.Frames[0].Raw.Plane()
		if err != nil {
			t.Fatal(err)
		}
		counts := make([]uint16, len(plane.Pix))
		for i, v := range plane.Pix {
			counts[i] = uint16(math.Round(float64(v) / 16))
		}
		if err := files.Write(file, raster.Pack(raster.Mono8, counts, plane.Width, plane.Height)); err != nil {
			t.Fatal(err)
		}
	}
	raw, err := files.Read(file, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	item.Frames[0].Raw = raw
	stage := newStage(t, h.Factory(), strings.Replace(textureSettings, `"max_peel_percent":0`, `"max_peel_percent":2`, 1))
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if len(item.Defects) != 1 {
		t.Fatalf("%d defects, want 1: %+v", len(item.Defects), item.Defects)
	}
	if d := item.Defects[0]; d.Kind != pipeline.Stain || d.Box.X0 < 200 || d.Box.X1 != 512 || d.YPx < 150 || d.YPx > 240 || d.AreaUM2 != 100*float64(d.AreaPx) {
		t.Errorf("got %+v", d)
	}
	if p := item.Planes["peel_percent"]; p.Step != 64 || p.OriginX != 63.5 || p.Pixels.Width != 7 || p.Pixels.Height != 5 || p.Pixels.At(6, 2) < 2 || p.Pixels.At(0, 2) > 1 {
		t.Errorf("got %+v", p)
	}
}

func textureConforms(t *testing.T, h *Host) {
	f := h.Factory()
	stagetest.Run(t, f, func(raw raster.Raw) *pipeline.Item {
		return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 10}}
	})
	for settings, want := range map[string]string{
		`{"tile_px":3}`:          "tile_px: got 3, want 16 to 1024",
		`{"peel_min_um":2000}`:   "peel_min_um: got 2000, want above 0 and below peel_max_um (1000)",
		`{"max_lay_percent":-1}`: "max_lay_percent: got -1, want 0 (no limit) to 1000",
	} {
		if _, _, err := f.New(decodeText(settings), pipeline.Environment{}); err == nil || err.Error() != want {
			t.Errorf("%s: got %v, want %q", settings, err, want)
		}
	}
}

// The whole picture is a hold where nothing of the region could be looked at.
func textureHoldsWhatItCannotSee(t *testing.T, h *Host) {
	item := surface(1, func(x, y float64) float64 { return 0 })
	item.Region = pipeline.NewRegion(512, 384, 0, 0, 0, []pipeline.Zone{{Name: "strip", Spans: []raster.Span{{Y: 3, X0: 0, X1: 512}}}})
	if err := newStage(t, h.Factory(), textureSettings).Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if len(item.Proofs) != 1 || item.Proofs[0].OK || !strings.Contains(item.Proofs[0].Reason, "texture was not inspected") {
		t.Errorf("got %+v", item.Proofs)
	}
}
