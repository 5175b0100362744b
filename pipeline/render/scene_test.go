package render

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/goccy/go-yaml"

	"lapgate/pipeline"
)

// bare returns a small scene of a smooth part with no imperfection at all, seen at 100 µm a pixel.
func bare() Scene {
	return Scene{Format: 1, Seed: 1, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 8, UnitsPerLot: 4,
		SerialPattern: "T%03d", LotPattern: "L%d",
		Part:   Part{Number: "disc", DiameterMM: 20, ClearApertureMM: 18},
		Camera: Camera{ID: "c", Width: 300, Height: 240, UMPerPx: 100, PixelFormat: "Mono12", BlackLevelDN: 50, GainDNPerE: 0.5, DarkNoiseE: 6, BlurPx: 0.8},
		Lamp:   Lamp{MinPower: 1, MaxPower: 1}, Reference: Reference{XPx: 4, YPx: 4, WidthPx: 20, HeightPx: 20},
		Views: []View{{Name: "ring", Light: LightRing, FixtureDN: 10, ReferenceDN: 800, ResponseDN: 2000},
			{Name: "bar", Light: LightBar, AzimuthDeg: 30, DirectionExponent: 4, DirectionFloor: 0.1, FixtureDN: 10, ReferenceDN: 800, ResponseDN: 2000, RotationDeg: 25, Mirror: true},
			{Name: "back", Light: LightBack, LevelDN: 3000, ReferenceDN: 800, ResponseDN: 2000}},
		Lines:     []Line{{Name: "A", Station: "A1"}, {Name: "B", Station: "B1"}},
		Processes: []Process{{Name: "p", Share: 1, HazeDN: Distribution{Value: 100}}}}
}

func newRenderer(t testing.TB, s Scene) *Renderer {
	t.Helper()
	r, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func readScene(t testing.TB, path string) Scene {
	t.Helper()
	text, err := os.ReadFile(filepath.FromSlash(path))
	if err != nil {
		t.Fatal(err)
	}
	var s Scene
	if err := yaml.UnmarshalWithOptions(text, &s, yaml.Strict()); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	return s
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %g, want %g ± %g", what, got, want, tolerance)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	cases := map[string]func(*Scene){
		"format: got 2":                    func(s *Scene) { s.Format = 2 },
		"start: got":                       func(s *Scene) { s.Start = "yesterday" },
		"serial_pattern: got":              func(s *Scene) { s.SerialPattern = "D" + "%%s %d" },
		"camera.pixel_format":              func(s *Scene) { s.Camera.PixelFormat = "Mono9" },
		"camera.gain_dn_per_e: got 0":      func(s *Scene) { s.Camera.GainDNPerE = 0 },
		"part.clear_aperture_mm: got 21":   func(s *Scene) { s.Part.ClearApertureMM = 21 },
		"lamp.max_power: got 0.5":          func(s *Scene) { s.Lamp.MaxPower = 0.5 },
		"views[1].direction_exponent":      func(s *Scene) { s.Views[1].DirectionExponent = 3 },
		"views[1].name":                    func(s *Scene) { s.Views[1].Name = "ring" },
		"reference.width_px: got 400":      func(s *Scene) { s.Reference.WidthPx = 400 },
		"processes[0].lay.pattern":         func(s *Scene) { s.Processes[0].Lay.Pattern = "spiral" },
		"processes[0].populations[0].kind": func(s *Scene) { s.Processes[0].Populations = []Population{{Kind: "hole"}} },
		"processes[0].populations[0].size": func(s *Scene) { s.Processes[0].Populations = []Population{{Kind: pipeline.Dig}} },
		"processes[0].haze_dn.median": func(s *Scene) {
			s.Processes[0].HazeDN = Distribution{Shape: ShapeLogNormal, Median: 5, Spread: 2, Min: 6, Max: 9}
		},
		"spoilers[0].kind: got \"hammer\"": func(s *Scene) { s.Spoilers = []Spoiler{{Kind: "hammer"}} },
		"spoilers[0].view: got \"ring\"":   func(s *Scene) { s.Spoilers = []Spoiler{{Kind: SpoilBroken, View: "ring", Value: 1}} },
	}
	for want, spoil := range cases {
		s := bare()
		spoil(&s)
		err := s.Check()
		if err == nil || !strings.Contains(err.Error(), want) || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("got %v, want an invalid-input error with %q", err, want)
		}
	}
}

// The demo's shares are those its recipe and pages rely on: most units conform, and few
// lie so close to a limit that the truth and a measurement may differ.
func TestDemoSceneYieldAndSizes(t *testing.T) {
	s := readScene(t, "../../configs/demo/scene.yaml")
	r := newRenderer(t, s)
	conforming, near := 0, 0
	processes := map[string]bool{}
	for i := range s.Units {
		truth := r.truth(r.Unit(i))
		processes[truth.Line+truth.Process] = true
		if truth.Conforming {
			conforming++
		}
		if truth.NearLimit {
			near++
		}
	}
	if share := float64(conforming) / float64(s.Units); s.Units < 200 || share < 0.85 || share > 0.90 {
		t.Errorf("%d of %d units conform, want 85 to 90 %% of at least 200", conforming, s.Units)
	}
	if near*10 > s.Units {
		t.Errorf("%d of %d units lie near a limit, want at most a tenth", near, s.Units)
	}
	if len(processes) != 2*len(s.Processes) {
		t.Errorf("lines and processes: got %v, want every process on both lines", processes)
	}
}

func TestSpoilerSceneHasEveryKind(t *testing.T) {
	s := readScene(t, "../../testdata/scenes/spoilers.yaml")
	if err := s.Check(); err != nil {
		t.Fatal(err)
	}
	kinds := map[string]bool{}
	for _, sp := range s.Spoilers {
		kinds[sp.Kind] = true
	}
	if len(kinds) != 11 {
		t.Errorf("got %v, want all 11 kinds", kinds)
	}
}
