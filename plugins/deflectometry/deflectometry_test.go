package deflectometry

import (
	"context"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/stagetest"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %g, want %g ± %g", what, got, want, tolerance)
	}
}

func pixels(values ...float64) []*raster.Plane {
	var out []*raster.Plane
	for _, v := range values {
		p := raster.NewPlane(1, 1)
		p.Pix[0] = float32(v)
		out = append(out, p)
	}
	return out
}

func straight(v float32) float64 { return float64(v) }

// Worked example of N-step phase shifting, φ = 0.7, A = 100, B = 50 (textbook formulas,
// numbers recomputed from the model).
func TestPhaseOfTheWorkedExample(t *testing.T) {
	for _, frames := range [][]*raster.Plane{
		pixels(138.242109, 67.789116, 61.757891, 132.210884), pixels(138.242109, 52.983501, 108.774389),
	} {
		f := solve(frames, straight)
		near(t, "phase", f.phase[0], 0.7, 1e-6)
		near(t, "modulation", f.modulation[0], 50, 1e-4)
	}
}

// The phase scatters by σ_φ = √(2/N)·σ_I/B: N = 4, σ_I = 2, B = 50 gives 0.0282843.
func TestPhaseNoise(t *testing.T) {
	const n = 40_000
	random := rand.New(rand.NewPCG(1, 2))
	frames := make([]*raster.Plane, 4)
	for k := range frames {
		frames[k] = raster.NewPlane(n, 1)
		for i := range n {
			frames[k].Pix[i] = float32(100 + 50*math.Cos(0.7+math.Pi/2*float64(k)) + 2*random.NormFloat64())
		}
	}
	sum := 0.0
	for _, p := range solve(frames, straight).phase {
		sum += (p - 0.7) * (p - 0.7)
	}
	near(t, "standard deviation", math.Sqrt(sum/n), 0.0282843, 4*0.0282843/math.Sqrt(2*n))
}

// Screen period 20 mm, distance 500 mm: a phase of 0.1 rad is a shift of 0.318310 mm, a
// ray turned by 0.636620 mrad, a slope of 0.318310 mrad.
func TestSlopeOfAPhase(t *testing.T) {
	s := Default
	s.PeriodsMM, s.BothDirections = []float64{20}, false
	var frames []*raster.Plane
	for k := range 4 {
		frames = append(frames, pixels(100+50*math.Cos(0.1+math.Pi/2*float64(k)))...)
	}
	got := stage{s}.slope(frames, []bool{true}, 255)
	near(t, "slope", got[0], 0.318310, 1e-5)
}

// The coarse phase says which fringe of the fine period it is, wherever it is.
func TestFringeOrder(t *testing.T) {
	for _, want := range []float64{-40, -3.2, 0, 7.9, 49.9} {
		coarse := want / 16
		fine := math.Remainder(want, 2*math.Pi)
		phase, doubt := refine([]float64{coarse + 0.05}, []float64{fine}, 16)
		near(t, "phase", phase[0], want, 1e-9)
		near(t, "doubt", doubt[0], 0.8/(2*math.Pi), 1e-9)
	}
}

// part is a mirror: its slopes in rad at (x, y) mm from the middle, and its size in px.
type part struct {
	width, height int
	um            float64
	slope         func(xMM, yMM float64) (sx, sy float64)
}

// frames are what the camera sees of a part under the settings' fringes: the screen's
// place grows with twice the part's, as in a plane mirror, and with the slope. A = 120,
// B = 90 counts of 8 bits at the display, noise 1 DN.
func (p part) frames(s Settings) *pipeline.Item {
	random := rand.New(rand.NewPCG(3, 4))
	item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: p.um, OriginX: float64(p.width-1) / 2, OriginY: float64(p.height-1) / 2}}
	for direction := range s.Frames() / (s.Steps * len(s.PeriodsMM)) {
		for _, period := range s.PeriodsMM {
			for k := range s.Steps {
				item.Frames = append(item.Frames, pipeline.Frame{Raw: p.frame(s, direction, period, k, random)})
			}
		}
	}
	return item
}

func (p part) frame(s Settings, direction int, period float64, k int, random *rand.Rand) raster.Raw {
	counts := make([]uint16, p.width*p.height)
	for i := range counts {
		x, y := (float64(i%p.width)-float64(p.width-1)/2)*p.um/1000, (float64(i/p.width)-float64(p.height-1)/2)*p.um/1000
		sx, sy := p.slope(x, y)
		at := 2*x + s.DistanceMM*math.Tan(2*sx)
		if direction == 1 {
			at = 2*y + s.DistanceMM*math.Tan(2*sy)
		}
		shown := 120 + 90*math.Cos(2*math.Pi*(at/period+float64(k)/float64(s.Steps)))
		seen := 255 * math.Pow(shown/255, s.DisplayGamma)
		counts[i] = uint16(math.Round(min(max(seen+random.NormFloat64(), 0), 254)))
	}
	return raster.Pack(raster.Mono8, counts, p.width, p.height)
}

func run(t *testing.T, s Settings, item *pipeline.Item) {
	t.Helper()
	st, _, err := Factory().New(func(dst any) error { *dst.(*Settings) = s; return nil }, pipeline.Environment{})
	if err == nil {
		err = st.Run(context.Background(), item)
	}
	if err != nil {
		t.Fatal(err)
	}
}

// pit is a shallow spherical dent in the middle: w wide and d deep, R = (w²/4 + d²)/2d.
func pit(wMM, dMM float64) func(x, y float64) (float64, float64) {
	radius := (wMM*wMM/4 + dMM*dMM) / (2 * dMM)
	return func(x, y float64) (float64, float64) {
		if math.Hypot(x, y) > wMM/2 {
			return 0, 0
		}
		return math.Asin(x / radius), math.Asin(y / radius)
	}
}

// A pit 0.5 mm wide and 0.5 µm deep has a radius of 62.5 mm and a slope of 4 mrad at its
// edge (textbook: 4d/w); its curvature is 1/R in both directions.
func TestPit(t *testing.T) {
	s := Default
	item := part{240, 200, 10, pit(0.5, 0.0005)}.frames(s)
	run(t, s, item)
	sx, sy := item.Planes[SlopeXPlane].Pixels, item.Planes[SlopeYPlane].Pixels
	for _, r := range []int{-20, -10, 10, 20} {
		want := (float64(r) + 0.5) * 0.01 / 62.5 * 1000 // the middle lies between pixels
		near(t, "slope x", float64(sx.At(120+r, 100)), want, 0.12)
		near(t, "slope y", float64(sy.At(120, 100+r)), want, 0.12)
	}
	near(t, "slope beside it", float64(sx.At(60, 40)), 0, 0.12)
	mean, n := 0.0, 0.0
	for y := 88; y < 112; y++ {
		for x := 108; x < 132; x++ {
			mean, n = mean+float64(item.Planes[CurvaturePlane].Pixels.At(x, y)), n+1
		}
	}
	near(t, "curvature", mean/n, 2/0.0625, 1)
	if len(item.Defects) != 1 {
		t.Fatalf("got %+v", item.Defects)
	}
	d := item.Defects[0]
	near(t, "diameter", d.DiameterUM, 500, 20)
	near(t, "x", d.XPx, 119.5, 0.5)
	near(t, "y", d.YPx, 99.5, 0.5)
	peak, _ := item.Number("dent_1_slope_mrad")
	near(t, "edge slope", peak, 4, 0.25)
	near(t, "coverage", item.Coverage.Share, 1, 0)
}

// A wave of height a·sin(2πx/λ) has a slope of 2πa/λ: 0.2 µm over 2 mm are 0.628 mrad,
// root mean square 0.444.
func TestWaviness(t *testing.T) {
	s := Default
	s.MaxSlopeMrad = 0
	item := part{400, 40, 10, func(x, _ float64) (float64, float64) { return 2 * math.Pi * 0.0002 / 2 * math.Cos(2*math.Pi*x/2), 0 }}.frames(s)
	run(t, s, item)
	rms, _ := item.Number("slope_x_rms_mrad")
	near(t, "root mean square", rms, 0.4443, 0.02)
	across, _ := item.Number("slope_y_rms_mrad")
	near(t, "across", across, 0, 0.05)
}

// A display of gamma 2.2 puts harmonics into the phase; linearised, they are gone.
func TestDisplayIsLinearised(t *testing.T) {
	s := Default
	s.MaxSlopeMrad, s.DisplayGamma, s.Steps = 0, 2.2, 3
	flat := part{300, 60, 10, func(float64, float64) (float64, float64) { return 0, 0 }}
	good := flat.frames(s)
	run(t, s, good)
	linear, _ := good.Number("slope_x_rms_mrad")
	bad := flat.frames(s)
	s.DisplayGamma = 1
	run(t, s, bad)
	raw, _ := bad.Number("slope_x_rms_mrad")
	if linear > 0.06 || raw < 3*linear {
		t.Errorf("slope %g mrad linearised, %g as it is", linear, raw)
	}
}

// Tilt and form of second order are the part's own; they leave no slope.
func TestFormIsTakenOff(t *testing.T) {
	s := Default
	item := part{200, 160, 10, func(x, y float64) (float64, float64) { return 0.004 + x/2000, -0.002 + y/3000 }}.frames(s)
	run(t, s, item)
	if peak, _ := item.Number("slope_peak_mrad"); peak > 0.2 || len(item.Defects) > 0 {
		t.Errorf("peak %g mrad, %+v", peak, item.Defects)
	}
}

// Pixels without fringes are not inspected.
func TestFaintFringesAreNotCovered(t *testing.T) {
	s := Default
	item := part{100, 80, 10, pit(0.2, 0)}.frames(Settings{Steps: s.Steps, PeriodsMM: s.PeriodsMM, BothDirections: true, DistanceMM: 500, DisplayGamma: 1})
	for i := range item.Frames {
		for y := range 20 {
			for x := range 100 {
				item.Frames[i].Raw.Data[y*100+x] = 50
			}
		}
	}
	run(t, s, item)
	near(t, "coverage", item.Coverage.Share, 0.75, 1e-9)
	if item.Coverage.MaskedPx != 2000 {
		t.Errorf("got %+v", item.Coverage)
	}
}

func TestWrongNumberOfFrames(t *testing.T) {
	item := part{10, 10, 10, pit(0.01, 0.0001)}.frames(Default)
	item.Frames = item.Frames[:15]
	st, _, _ := Factory().New(nil, pipeline.Environment{})
	if err := st.Run(context.Background(), item); err == nil || !strings.Contains(err.Error(), "has 15 frames, want 16") || pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v", err)
	}
}

func TestConforms(t *testing.T) {
	stagetest.Run(t, Factory(), func(raw raster.Raw) *pipeline.Item {
		item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: 10}}
		for range Default.Frames() {
			item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
		}
		return item
	})
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"steps":             func(s *Settings) { s.Steps = 2 },
		"periods_mm":        func(s *Settings) { s.PeriodsMM = nil },
		"periods_mm[1]":     func(s *Settings) { s.PeriodsMM = []float64{20, 30} },
		"periods_mm[0]":     func(s *Settings) { s.PeriodsMM = []float64{math.NaN()} },
		"distance_mm":       func(s *Settings) { s.DistanceMM = 0 },
		"display_gamma":     func(s *Settings) { s.DisplayGamma = math.Inf(1) },
		"min_modulation_dn": func(s *Settings) { s.MinModulationDN = 0 },
		"max_slope_mrad":    func(s *Settings) { s.MaxSlopeMrad = math.NaN() },
		"min_area_px":       func(s *Settings) { s.MinAreaPx = 0 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}

var update = flag.Bool("update", false, "rewrite the demo frames")

// The demo frames are eight of one direction, of a mirror with a dent 0.6 mm wide and
// 0.4 µm deep.
func TestDemoFrames(t *testing.T) {
	s := Default
	s.BothDirections = false
	if *update {
		for i, f := range (part{160, 120, 10, pit(0.6, 0.0004)}).frames(s).Frames {
			if err := files.Write(fmt.Sprintf("../outside/demo/fringes_%d.png", i), f.Raw); err != nil {
				t.Fatal(err)
			}
		}
	}
	item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: 10}}
	for i := range s.Frames() {
		raw, err := files.Read(fmt.Sprintf("../outside/demo/fringes_%d.png", i), files.Options{})
		if err != nil {
			t.Fatal(err)
		}
		item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
	}
	run(t, s, item)
	peak, _ := item.Number("slope_peak_mrad")
	near(t, "edge slope", peak, 4*0.0004/0.6*1000, 0.25)
	if len(item.Defects) == 0 {
		t.Error("no dent was found")
	}
}
