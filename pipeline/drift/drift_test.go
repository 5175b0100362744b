package drift

import (
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
)

// camera is a scene whose sensor has hot and dead pixels and 1 % of pixel gain, with a
// reference patch; power is the lamp's.
func camera(power float64) render.Scene {
	return render.Scene{Seed: 5, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 1, UnitsPerLot: 1, SerialPattern: "D%d", LotPattern: "L%d",
		Part: render.Part{Number: "disc", DiameterMM: 6, ClearApertureMM: 5},
		Camera: render.Camera{ID: "c", Width: 400, Height: 320, UMPerPx: 25, PixelFormat: "Mono8", ExposureUS: 1, BlackLevelDN: 6, GainDNPerE: 0.05, DarkNoiseE: 8,
			ResponseSpread: 0.01, DarkSpreadDN: 0.2, HotPixels: 30, HotPixelDN: render.Distribution{Value: 60}, DeadPixels: 10, BlurPx: 0.7},
		Lamp: render.Lamp{MinPower: power, MaxPower: power}, Reference: render.Reference{XPx: 8, YPx: 8, WidthPx: 40, HeightPx: 40},
		Views:     []render.View{{Name: "ring", Light: render.LightRing, StrayDN: 3, ReferenceDN: 90, ResponseDN: 160}},
		Lines:     []render.Line{{Name: "A", Station: "A1"}},
		Processes: []render.Process{{Name: "p", Share: 1, HazeDN: render.Distribution{Value: 12}, RimDN: 120, RimWidthUM: 60}}}
}

func partFrame(t *testing.T, power float64) *raster.Plane {
	t.Helper()
	r, err := render.New(camera(power))
	if err != nil {
		t.Fatal(err)
	}
	u := r.Unit(0)
	f, err := r.Frame(&u, "ring")
	if err != nil {
		t.Fatal(err)
	}
	p, err := f.Raw.Plane()
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func meanFrame(t *testing.T, kind string) *raster.Plane {
	t.Helper()
	r, err := render.New(camera(1))
	if err != nil {
		t.Fatal(err)
	}
	out := raster.NewPlane(400, 320)
	const n = 8
	for k := range n {
		f, err := r.CalibrationFrame(kind, "ring", k)
		if err != nil {
			t.Fatal(err)
		}
		p, _ := f.Raw.Plane()
		for i, v := range p.Pix {
			out.Pix[i] += v / n
		}
	}
	return out
}

// calibration has what the readings need; pattern pixels are those that stand out most.
func calibration(t *testing.T) *pipeline.Calibration {
	t.Helper()
	dark, bright := meanFrame(t, render.FrameDark), meanFrame(t, render.FrameResponse)
	c := &pipeline.Calibration{Dark: dark, Noise: pipeline.NoiseModel{GainDNPerE: 0.05, DarkDN: 0.5},
		Reference: &pipeline.ReferencePatch{Box: pipeline.Box{X0: 12, Y0: 12, X1: 44, Y1: 44}}, PartEdge: &pipeline.PartEdge{WidthPx: 2.2, DiameterPx: 240}}
	level, _, err := PatchLevel(partFrame(t, 1), c, c.Reference.Box)
	if err != nil {
		t.Fatal(err)
	}
	c.Reference.LevelDN = level
	for y := 2; y < 318; y++ {
		for x := 2; x < 398; x++ {
			d, b := dark.At(x, y)-around(dark, x, y), bright.At(x, y)-around(bright, x, y)
			if r := (b - d) / 160; d > 5 || r < -0.5 {
				c.FixedPattern = append(c.FixedPattern, pipeline.PatternPixel{X: x, Y: y, DarkDN: float64(d), Response: float64(r)})
			}
		}
	}
	return c
}

// The reading follows the lamp; the stray light under the patch goes with it.
func TestLightFollowsTheLamp(t *testing.T) {
	c := calibration(t)
	for power, want := range map[float64]State{1: Steady, 0.93: Warning, 0.8: Held, 0.02: Held, 1.08: Warning, 1.2: Held} {
		patch, err := NewPatch(c, c.Reference.Box)
		if err != nil {
			t.Fatal(err)
		}
		r, _, err := patch.Light(partFrame(t, power), 255, c, LightBounds())
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(r.Value-power) > 4*r.Uncertainty+0.002 || r.State != want {
			t.Errorf("power %v: got %v ± %v, %s, want %s", power, r.Value, r.Uncertainty, r.State, want)
		}
	}
}

// A picture moved by 2 px against the sensor's pattern reads near 0; lamp and part do not
// matter.
func TestPatternTellsAMovedPicture(t *testing.T) {
	c := calibration(t)
	frame := partFrame(t, 0.9)
	r, ok := Pattern(frame, 255, c, PatternBounds())
	if !ok || math.Abs(r.Value-1) > 0.15 || r.State != Steady {
		t.Errorf("in place: got %+v, %v", r, ok)
	}
	moved := raster.NewPlane(400, 320)
	for y := range 320 {
		copy(moved.Row(y)[2:], frame.Row(y)[:398])
	}
	r, ok = Pattern(moved, 255, c, PatternBounds())
	if !ok || math.Abs(r.Value) > 0.2 || r.State != Held {
		t.Errorf("moved: got %+v, %v", r, ok)
	}
	if !strings.Contains(r.Cause, "(+2, +0) px") {
		t.Errorf("moved: the cause is %q", r.Cause)
	}
	other := raster.NewPlane(400, 320) // mirrored: the marks are nowhere near
	for y := range 320 {
		for x, v := range frame.Row(y) {
			other.Set(399-x, y, v)
		}
	}
	r, ok = Pattern(other, 255, c, PatternBounds())
	if !ok || r.State != Held || !strings.Contains(r.Proof().Reason, "another camera") {
		t.Errorf("mirrored: got %+v, %v", r, ok)
	}
	c.FixedPattern = c.FixedPattern[:2]
	if _, ok = Pattern(frame, 255, c, PatternBounds()); ok {
		t.Error("two pixels were taken for a pattern")
	}
}

func TestFocusAndScale(t *testing.T) {
	c := calibration(t)
	for width, want := range map[float64]State{2.2: Steady, 2.9: Warning, 3.4: Held, 1.0: Held, math.NaN(): Held} {
		if r, err := Focus(width, c, FocusBounds()); err != nil || r.State != want {
			t.Errorf("edge of %v px: got %+v, %v, want %s", width, r, err, want)
		}
	}
	for diameter, want := range map[float64]State{240.5: Steady, 241.5: Warning, 243: Held, 238.5: Warning} {
		if r, err := Scale(diameter, 0.001, c, ScaleBounds()); err != nil || r.State != want {
			t.Errorf("diameter of %v px: got %+v, %v, want %s", diameter, r, err, want)
		}
	}
	if _, err := Focus(2, &pipeline.Calibration{}, FocusBounds()); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("no edge: got %v", err)
	}
}

func TestProofsCarryWarnings(t *testing.T) {
	for value, want := range map[float64]State{1: Steady, 0.93: Warning, 1.3: Held} {
		p := reading(pipeline.ProofLight, value, 0, LightBounds(), "low", "high").Proof()
		if p.State() != string(want) || (p.Warning != "") != (want == Warning) || (p.Reason != "") != (want == Held) || p.WarnLow != 0.95 || p.High != 1.15 {
			t.Errorf("%v: got %+v, want %s", value, p, want)
		}
	}
}

func TestTheWorseReadingCounts(t *testing.T) {
	at := func(v float64) Reading { return reading(pipeline.ProofLight, v, 0, LightBounds(), "low", "high") }
	for _, c := range [][3]float64{{1, 0.9, 0.9}, {0.8, 1.1, 0.8}, {1.01, 0.98, 0.98}} {
		if got := Worse(at(c[0]), at(c[1])); got.Value != c[2] {
			t.Errorf("of %v and %v: %v", c[0], c[1], got.Value)
		}
	}
}

func TestBoundsAreInOrder(t *testing.T) {
	for _, b := range []Bounds{{}, LightBounds(), FocusBounds(), ScaleBounds(), PatternBounds()} {
		if err := b.Check("light"); err != nil {
			t.Error(err)
		}
	}
	for _, b := range []Bounds{{0.9, 0.8, 1.1, 1.2}, {0.8, 1.01, 1.1, 1.2}, {0.8, 0.9, 1.1, 1.05}, {-1, 0.9, 1.1, 1.2}, {0.8, 0.9, 1.1, math.NaN()}} {
		if err := b.Check("light"); err == nil || !strings.HasPrefix(err.Error(), "light: ") {
			t.Errorf("%+v: got %v", b, err)
		}
	}
}

func TestPatchIsRefused(t *testing.T) {
	c := calibration(t)
	for name, box := range map[string]pipeline.Box{"beyond": {X0: 12, Y0: 12, X1: 500, Y1: 44}, "nothing there": {X0: 80, Y0: 4, X1: 90, Y1: 14}} {
		c.Stray = raster.NewPlane(400, 320)
		if _, err := NewPatch(c, box); pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: got %v", name, err)
		}
	}
	c.Stray = nil
	if _, err := NewPatch(c, pipeline.Box{X0: 1, Y0: 1, X1: 9, Y1: 9}); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("no stray frames: got %v", err)
	}
	saturated := partFrame(t, 1)
	for i := range saturated.Pix {
		saturated.Pix[i] = 255
	}
	patch, _ := NewPatch(c, c.Reference.Box)
	if r, _, err := patch.Light(saturated, 255, c, Bounds{0.1, 0.2, 9, 10}); err != nil || r.State != Held || !strings.Contains(r.Proof().Reason, "saturated") {
		t.Errorf("saturated: %+v, %v", r, err)
	}
}
