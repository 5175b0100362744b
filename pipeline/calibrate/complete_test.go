package calibrate

import (
	"math"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/render"
)

// station is a rendered camera with its frames of every kind, in memory.
type station struct {
	t     *testing.T
	scene render.Scene
	r     *render.Renderer
}

const stationUM = 25.0

func newStation(t *testing.T) *station {
	s := &station{t: t, scene: render.Scene{Seed: 9, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 4, UnitsPerLot: 4, SerialPattern: "D%d", LotPattern: "L%d",
		Part: render.Part{Number: "disc", DiameterMM: 7, ClearApertureMM: 6},
		Camera: render.Camera{ID: "c", Width: 480, Height: 360, UMPerPx: stationUM, PixelFormat: "Mono12", ExposureUS: 1000, BlackLevelDN: 60, GainDNPerE: 0.25, DarkNoiseE: 8,
			ResponseSpread: 0.01, DarkSpreadDN: 1, HotPixels: 12, HotPixelDN: render.Distribution{Value: 300}, DeadPixels: 5, BlurPx: 0.8},
		Lamp: render.Lamp{MinPower: 1, MaxPower: 1}, Reference: render.Reference{XPx: 4, YPx: 4, WidthPx: 24, HeightPx: 24},
		Views:     []render.View{{Name: "ring", Light: render.LightRing, StrayDN: 20, ReferenceDN: 1200, ResponseDN: 2400, Vignetting: 0.1}},
		Lines:     []render.Line{{Name: "A", Station: "A1"}},
		Processes: []render.Process{{Name: "p", Share: 1, HazeDN: render.Distribution{Value: 100}, RimDN: 1500, RimWidthUM: 75}}}}
	var err error
	if s.r, err = render.New(s.scene); err != nil {
		t.Fatal(err)
	}
	return s
}

func (s *station) frame(name string, f pipeline.Frame, err error) Frame {
	s.t.Helper()
	if err != nil {
		s.t.Fatal(err)
	}
	return Frame{Name: name, Capture: f.Header.Capture, Raw: f.Raw}
}

func (s *station) take(kind string, n int) []Frame {
	var out []Frame
	for i := range n {
		f, err := s.r.CalibrationFrame(kind, "ring", i)
		out = append(out, s.frame(kind+string(rune('0'+i)), f, err))
	}
	return out
}

func (s *station) target(t render.Target, n int) Frame {
	f, _, err := s.r.TargetFrame("ring", t, n)
	return s.frame("target", f, err)
}

func (s *station) parts(n int) []Frame {
	var out []Frame
	for i := range n {
		u := s.r.Unit(i)
		f, err := s.r.Frame(&u, "ring")
		out = append(out, s.frame("part", f, err))
	}
	return out
}

func scaleTarget() render.Target {
	return render.Target{PitchUM: 40 * stationUM, Columns: 13, Rows: 9, DiametersUM: []float64{14 * stationUM}, BackgroundDN: 40, BrightnessDN: 1500,
		RotationDeg: 2, K1: -0.01}
}

func sizingTarget() (render.Target, [][]float64) {
	t := render.Target{PitchUM: 40 * stationUM, Columns: 10, Rows: 7, BackgroundDN: 20, BrightnessDN: 3000, ReferenceUM: 20, FluxExponent: 1.5}
	var list [][]float64
	for row := range t.Rows {
		var line []float64
		for column := range t.Columns {
			line = append(line, []float64{10, 14, 19, 26, 36}[(2*row+column)%5])
		}
		list, t.DiametersUM = append(list, line), append(t.DiametersUM, line...)
	}
	return t, list
}

func (s *station) inputs() (Request, Inputs) {
	dark := s.take(render.FrameDark, 4)
	warm, hot := 31.0, 33.0
	dark[0].SensorC, dark[3].SensorC = &warm, &hot
	req := request()
	req.Capture, req.Scale = dark[0].Capture, pipeline.Scale{}
	req.Certificate = dots.Certificate{Serial: "T-7", Date: "2024-02-01", PitchUM: 40 * stationUM, UncertaintyUM: 0.5}
	req.Patch = &pipeline.Box{X0: 6, Y0: 6, X1: 26, Y1: 26}
	req.Part = PartSearch{DiameterMM: 7, Polarity: "rim"}
	target, list := sizingTarget()
	req.SizingDiameters = list
	return req, Inputs{Dark: Frames(dark...), Stray: Frames(s.take(render.FrameStray, 4)...), Response: Frames(s.take(render.FrameResponse, 4)...),
		Dots: Frames(s.target(scaleTarget(), 0)), Sizing: Frames(s.target(target, 1)), Part: Frames(s.parts(2)...)}
}

// Everything a calibration can hold, against what the simulated camera was told; and the
// same from its folder.
func TestCompleteCalibration(t *testing.T) {
	req, in := newStation(t).inputs()
	m, err := Make(req, in)
	if err != nil {
		t.Fatal(err)
	}
	c := m.Calibration
	near := func(what string, got, want, tolerance float64) {
		t.Helper()
		if !(math.Abs(got-want) <= tolerance) {
			t.Errorf("%s: got %v, want %v ± %v", what, got, want, tolerance)
		}
	}
	near("scale", c.Scale.UMPerPx, stationUM, 3*c.Scale.UncertaintyUM)
	near("scale uncertainty", c.Scale.UncertaintyUM, stationUM*0.5/1000, 0.002)
	near("sensor", c.Sensor.MeanC, 32, 1e-9)
	near("exponent", c.Sizing.Exponent, 1.5, 0.06)
	// Patch and stray light behind it, dimmed by the vignetting of the corner, on pixels of gain 1.
	near("patch", c.Reference.LevelDN, 0.905*1200+26, 12)
	near("diameter", c.PartEdge.DiameterPx, 280, 1)
	if c.Scale.Source != "dot target T-7, certificate of 2024-02-01" || c.Distortion == nil {
		t.Fatalf("scale %+v, distortion %+v", c.Scale, c.Distortion)
	}
	x, _ := c.Distortion.Ideal(20, 20)
	want, _ := scaleTarget().Lens(newStation(t).scene.Camera).Ideal(20, 20)
	near("distortion at a corner", x, want, 0.1)
	if !(c.PartEdge.WidthPx > 1 && c.PartEdge.WidthPx < 6) || len(c.FixedPattern) < 100 {
		t.Errorf("edge %+v, %d pattern pixels", c.PartEdge, len(c.FixedPattern))
	}
	near("PRNU against neighbours", math.Sqrt(m.Provenance.ResponsePattern.LocalDN2)/2300, 0.01, 0.01)
	dir := filepath.Join(t.TempDir(), "ring")
	if err := Write(dir, m); err != nil {
		t.Fatal(err)
	}
	if got, err := LoadMade(dir); err != nil || !reflect.DeepEqual(got, m) {
		t.Errorf("from its folder: %v, %+v", err, got.Provenance)
	}
}

// A calibration without the new inputs writes none of their keys, so a folder written
// before they came still reads, with the hash it had.
func TestOldFoldersAreReadable(t *testing.T) {
	m := madeFromFolders(t)
	p := &m.Provenance
	p.PhotonTransfer, p.DarkPattern, p.ResponsePattern, m.Calibration.FixedPattern, m.Calibration.Hash = nil, nil, nil, nil, ""
	text, err := documentOf(m).hash()
	if err != nil {
		t.Fatal(err)
	}
	m.Calibration.Hash = text
	dir := filepath.Join(t.TempDir(), "old")
	if err := Write(dir, m); err != nil {
		t.Fatal(err)
	}
	if c, err := Load(dir); err != nil || c.Hash != text || c.Distortion != nil || c.Sizing != nil || c.Reference != nil {
		t.Errorf("%+v, %v", c, err)
	}
}

func TestTargetsAndPartsThatCannotServeAreRefused(t *testing.T) {
	s := newStation(t)
	goodReq, goodIn := s.inputs()
	few := scaleTarget()
	few.Columns, few.Rows = 3, 4
	for name, c := range map[string]struct {
		spoil func(*Request, *Inputs)
		want  string
	}{
		"scale twice":     {func(r *Request, _ *Inputs) { r.Scale.UMPerPx = 10 }, "want one of the two"},
		"no pitch":        {func(r *Request, _ *Inputs) { r.Certificate.PitchUM = 0 }, "want that of its certificate"},
		"no uncertainty":  {func(r *Request, _ *Inputs) { r.Certificate.UncertaintyUM = 0 }, "standard uncertainty"},
		"no date":         {func(r *Request, _ *Inputs) { r.Certificate.Date = "May" }, "want YYYY-MM-DD"},
		"few dots":        {func(_ *Request, in *Inputs) { in.Dots = Frames(s.target(few, 0)) }, "dots: frame 1: dot target: found 12 dots, want at least 16"},
		"no diameters":    {func(r *Request, _ *Inputs) { r.SizingDiameters = nil }, "want a list"},
		"wrong diameter":  {func(r *Request, _ *Inputs) { r.Part.DiameterMM = 9 }, "part: part: no circle"},
		"patch in shade":  {func(r *Request, _ *Inputs) { r.Patch = &pipeline.Box{X0: 200, Y0: 150, X1: 220, Y1: 170} }, "is the box on the patch"},
		"patch unseen":    {func(_ *Request, in *Inputs) { in.Part, in.Stray = nil, nil }, "no frames show it"},
		"patch off frame": {func(r *Request, _ *Inputs) { r.Patch.X1 = 1000 }, "want a box inside the frame"},
	} {
		req, in, box := goodReq, goodIn, *goodReq.Patch
		req.Patch = &box
		c.spoil(&req, &in)
		if _, err := Make(req, in); pipeline.KindOf(err) != pipeline.InvalidKind || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want ...%s...", name, err, c.want)
		}
	}
}
