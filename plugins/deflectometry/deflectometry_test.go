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

// planes makes a sequence of planes.
func planes(list ...*raster.Plane) sequence {
	q := sequence{width: list[0].Width, height: list[0].Height}
	for _, p := range list {
		q.rows = append(q.rows, func(dst []float32, y int) { copy(dst, p.Row(y)) })
	}
	return q
}

// pixels makes a sequence of frames of one pixel.
func pixels(values ...float64) sequence {
	var out []*raster.Plane
	for _, v := range values {
		p := raster.NewPlane(1, 1)
		p.Pix[0] = float32(v)
		out = append(out, p)
	}
	return planes(out...)
}

func straight(v float32) float64 { return float64(v) }

// Worked example of N-step phase shifting, φ = 0.7, A = 100, B = 50 (textbook formulas,
// numbers recomputed from the model).
func TestPhaseOfTheWorkedExample(t *testing.T) {
	for _, frames := range []sequence{
		pixels(138.242109, 67.789116, 61.757891, 132.210884), pixels(138.242109, 52.983501, 108.774389),
	} {
		f := solve(frames, straight)
		near(t, "phase", f.phase[0], 0.7, 1e-6)
		near(t, "modulation", float64(f.modulation[0]), 50, 1e-4)
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
	for _, p := range solve(planes(frames...), straight).phase {
		sum += (p - 0.7) * (p - 0.7)
	}
	near(t, "standard deviation", math.Sqrt(sum/n), 0.0282843, 4*0.0282843/math.Sqrt(2*n))
}

// Screen period 20 mm, distance 500 mm: a phase of 0.1 rad is a shift of 0.318310 mm, a
// ray turned by 0.636620 mrad, a slope of 0.318310 mrad.
func TestSlopeOfAPhase(t *testing.T) {
	s := Default
	s.PeriodsMM, s.BothDirections = []float64{20}, false
	var values []float64
	for k := range 4 {
		values = append(values, 100+50*math.Cos(0.1+math.Pi/2*float64(k)))
	}
	got := stage{s}.slope(pixels(values...), []bool{true}, 255)
	near(t, "slope", got[0], 0.318310, 1e-5)
}

// The coarse phase says which fringe of the fine period it is, wherever it is.
func TestFringeOrder(t *testing.T) {
	for _, want := range []float64{-40, -3.2, 0, 7.9, 49.9} {
		coarse := want / 16
		fine := math.Remainder(want, 2*math.Pi)
		phase, use := []float64{fine}, []bool{true}
		refine([]float64{coarse + 0.05}, phase, 16, use) // off by 0.8/2π of an order
		near(t, "phase", phase[0], want, 1e-9)
		if !use[0] {
			t.Errorf("%g: out of use", want)
		}
		if refine([]float64{coarse + 0.15}, []float64{fine}, 16, use); use[0] { // by 2.4/2π
			t.Errorf("%g: in use, though the order is in doubt", want)
		}
	}
}

// part is a mirror: its slopes in rad at (x, y) mm from the middle, and its size in px.
type part struct {
	width, height int
	um            float64
	slope         func(xMM, yMM float64) (sx, sy float64)
}

// whole is the region of a whole frame.
func whole(width, height int) *pipeline.Region {
	var spans []raster.Span
	for y := range height {
		spans = append(spans, raster.Span{Y: y, X0: 0, X1: width})
	}
	return pipeline.NewRegion(width, height, 0, 0, 0, []pipeline.Zone{{Name: "all", Spans: spans}})
}

// frames are what the camera sees of a part under the settings' fringes: the screen's
// place grows with twice the part's, as in a plane mirror, and with the slope. A = 120,
// B = 90 counts of 8 bits at the display, noise 1 DN.
func (p part) frames(s Settings) *pipeline.Item {
	random := rand.New(rand.NewPCG(3, 4))
	item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: p.um, OriginX: float64(p.width-1) / 2, OriginY: float64(p.height-1) / 2},
		Region: whole(p.width, p.height)}
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
	near(t, "edge slope", d.SlopeMrad, 4, 0.25)
	if d.Kind != pipeline.Dent {
		t.Errorf("kind %s", d.Kind)
	}
	near(t, "coverage", item.Coverage.Share, 1, 0)
}

// dents are Gaussian: h deep, s its standard deviation, at (x, y) in mm.
func dents(hMM, sMM float64, places ...[2]float64) func(x, y float64) (float64, float64) {
	return func(x, y float64) (float64, float64) {
		sx, sy := 0.0, 0.0
		for _, p := range places {
			dx, dy := x-p[0], y-p[1]
			e := hMM / (sMM * sMM) * math.Exp(-(dx*dx+dy*dy)/(2*sMM*sMM))
			sx, sy = sx+dx*e, sy+dy*e
		}
		return sx, sy
	}
}

// A Gaussian dent has its steepest slope, h/(s·√e), at a distance of s from its middle; the
// slope r·e^((1−r²)/2) in units of that, r in units of s, is one half at r = 0.3187 and at
// r = 1.9236 (Newton's method on the closed form). With fringes in one direction the two
// flanks are the same one defect, as long; across, the slope falls to a half at √(2 ln 2).
func TestGaussianDentIsOneDefect(t *testing.T) {
	const h, sigma, outer = 0.0005, 0.15, 1.9236 // mm, mm
	peak := 1000 * h / (sigma * math.Sqrt(math.E))
	near(t, "closed form", peak, 2.0218, 1e-4)
	for _, both := range []bool{true, false} {
		for _, threshold := range []float64{0.5, 1, 1.8} {
			s := Default
			s.BothDirections, s.MaxSlopeMrad = both, threshold
			item := part{240, 200, 10, dents(h, sigma, [2]float64{0.2, -0.1})}.frames(s)
			run(t, s, item)
			if len(item.Defects) != 1 || item.Defects[0].Kind != pipeline.Dent {
				t.Fatalf("both directions %v, threshold %g: got %+v, want one dent", both, threshold, item.Defects)
			}
			d := item.Defects[0]
			near(t, "slope", d.SlopeMrad, peak, 0.05*peak)
			near(t, "x", d.XPx, 119.5+20, 0.5)
			near(t, "y", d.YPx, 99.5-10, 0.5)
			near(t, "box", float64(d.Box.X1-d.Box.X0), 2*outer*15, 3)
			if both {
				near(t, "diameter", d.DiameterUM, 2*outer*150, 25)
			} else {
				near(t, "length", d.LengthUM, 2*outer*150, 30) // by moments, as of an ellipse
			}
		}
	}
}

// Dents whose flanks do not meet are as many defects, each with its slope.
func TestDentsApart(t *testing.T) {
	const h, sigma = 0.0005, 0.1
	for _, both := range []bool{true, false} {
		s := Default
		s.BothDirections = both
		item := part{300, 240, 10, dents(h, sigma, [2]float64{-0.8, -0.6}, [2]float64{0.1, -0.6}, [2]float64{0.8, 0.5})}.frames(s)
		run(t, s, item)
		if len(item.Defects) != 3 {
			t.Fatalf("both directions %v: got %+v, want three dents", both, item.Defects)
		}
		for _, d := range item.Defects {
			near(t, "slope", d.SlopeMrad, 1000*h/(sigma*math.Sqrt(math.E)), 0.2)
		}
	}
}

// A wave of height a·sin(2πx/λ) has a slope of 2πa/λ: 0.2 µm over 2 mm are 0.628 mrad,
// root mean square 0.444. Over four waves it is one defect, and no dent.
func TestWaviness(t *testing.T) {
	slope := 2 * math.Pi * 0.0002 / 2 // rad
	for _, turned := range []bool{false, true} {
		s := Default
		s.MaxSlopeMrad = 0.5
		item := part{800, 120, 10, func(x, _ float64) (float64, float64) { return slope * math.Cos(2*math.Pi*x/2), 0 }}.frames(s)
		if turned {
			item = part{120, 800, 10, func(_, y float64) (float64, float64) { return 0, slope * math.Cos(2*math.Pi*y/2) }}.frames(s)
		}
		run(t, s, item)
		along, across := "slope_x_rms_mrad", "slope_y_rms_mrad"
		if turned {
			along, across = across, along
		}
		rms, _ := item.Number(along)
		near(t, "root mean square", rms, 0.4443, 0.02)
		rms, _ = item.Number(across)
		near(t, "across", rms, 0, 0.05)
		if len(item.Defects) != 1 || item.Defects[0].Kind != pipeline.Waviness {
			t.Fatalf("turned %v: got %+v, want one defect, waviness", turned, item.Defects)
		}
		near(t, "slope", item.Defects[0].SlopeMrad, 1000*slope, 100*slope) // taking the form off changes four waves by up to 0.095 of that
		near(t, "area", item.Defects[0].AreaUM2/1e6, 8*1.2, 1.2)
	}
}

// Where noise could hide a dent of the threshold, the view is not proven.
func TestNoisySlopes(t *testing.T) {
	s := Default
	item := part{120, 100, 10, pit(0.2, 0)}.frames(s)
	run(t, s, item)
	if len(item.Proofs) != 1 || !item.Proofs[0].OK {
		t.Errorf("got %+v", item.Proofs)
	}
	// σ_φ = √(2/N)·σ_I/B with 1 DN of noise (and of rounding, 1/√12), B = 90: 0.0082 rad, a slope of 0.0260 mrad
	near(t, "noise", item.Proofs[0].Value, 0.0260, 0.001)
	s.MaxSlopeMrad = 0.06
	noisy := part{120, 100, 10, pit(0.2, 0)}.frames(s)
	run(t, s, noisy)
	if len(noisy.Proofs) != 1 || noisy.Proofs[0].OK || !strings.Contains(noisy.Proofs[0].Reason, "want at most a 5th of max_slope_mrad (0.06)") {
		t.Errorf("got %+v", noisy.Proofs)
	}
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
		item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: 10}, Region: whole(raw.Width, raw.Height)}
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

// The demo frames are sixteen, of a mirror with a dent 0.6 mm wide and 0.4 µm deep.
func TestDemoFrames(t *testing.T) {
	s := Default
	if *update {
		for i, f := range (part{160, 120, 10, pit(0.6, 0.0004)}).frames(s).Frames {
			if err := files.Write(fmt.Sprintf("../outside/demo/fringes_%02d.png", i), f.Raw); err != nil {
				t.Fatal(err)
			}
		}
	}
	item := &pipeline.Item{View: "fringes", Geometry: pipeline.Planar{UMPerPx: 10}, Region: whole(160, 120)}
	for i := range s.Frames() {
		raw, err := files.Read(fmt.Sprintf("../outside/demo/fringes_%02d.png", i), files.Options{})
		if err != nil {
			t.Fatal(err)
		}
		item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
	}
	run(t, s, item)
	if len(item.Defects) != 1 {
		t.Fatalf("got %+v, want one dent", item.Defects)
	}
	near(t, "edge slope", item.Defects[0].SlopeMrad, 4*0.0004/0.6*1000, 0.25)
	near(t, "diameter", item.Defects[0].DiameterUM, 600, 30)
}
