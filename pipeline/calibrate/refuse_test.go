package calibrate

import (
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// set is one good set of frames for a case to spoil.
type set struct {
	c                     *camera
	req                   Request
	dark, stray, response []Frame
}

func goodSet() *set {
	c := newCamera(128, 96)
	return &set{
		c: c, req: request(),
		dark: c.take("dark", 3, flat(0)), stray: c.take("stray", 3, flat(200)), response: c.take("flat", 3, c.vignetted(diffuser)),
	}
}

func (s *set) make() error {
	_, err := Make(s.req, Inputs{Dark: Frames(s.dark...), Stray: Frames(s.stray...), Response: Frames(s.response...)})
	return err
}

func (s *set) edit(f *Frame, change func(x, y int, v uint16) uint16) {
	counts, _ := f.Raw.Counts()
	for i, v := range counts {
		counts[i] = change(i%s.c.width, i/s.c.width, v)
	}
	*f = s.c.frame(f.Name, counts)
}

// textured is a diffuser with a grain of its own, shifted by dx pixels.
func textured(dx int) func(x, y int) float64 {
	return func(x, y int) float64 {
		return diffuser * (1 + 0.05*float64(((x+dx)/3*7+y/3*5)%11-5)/5)
	}
}

func TestGoodSetPasses(t *testing.T) {
	if err := goodSet().make(); err != nil {
		t.Error(err)
	}
}

func TestRefusals(t *testing.T) {
	cases := []struct {
		name  string
		spoil func(s *set)
		want  []string
	}{
		{"one dark", func(s *set) { s.dark = s.dark[:1] }, []string{"dark: got 1 frames, want at least 2"}},
		{"one response", func(s *set) { s.response = s.response[:1] }, []string{"response: got 1 frames, want at least 2"}},
		{"no stray in folder", func(s *set) { s.stray = nil }, []string{"stray: got 0 frames"}},
		{"unequal size", func(s *set) { s.response[1] = newCamera(128, 95).take("other", 1, flat(diffuser))[0] },
			[]string{"response: other0.pgm: size: got 128 × 95 pixels, want 128 × 96"}},
		{"unequal format", func(s *set) { s.dark[2].Raw.Format = raster.Mono16 },
			[]string{"dark: dark2.pgm: pixel_format: got Mono16 (16 bits), want Mono12"}},
		{"other exposure", func(s *set) { s.response[0].Capture.ExposureUS = 900 }, []string{"flat0.pgm: exposure_us: got 900, want 1000", "same settings"}},
		{"other gain", func(s *set) { s.stray[1].Capture.GainDB = 0 }, []string{"stray1.pgm: gain_db: got 0, want 6"}},
		{"saturated", func(s *set) {
			s.edit(&s.response[1], func(x, y int, v uint16) uint16 {
				if y == 5 {
					return 4095
				}
				return v
			})
		}, []string{"response: flat1.pgm: saturated: 128 pixels", "less light"}},
		{"clipped", func(s *set) { s.c.offset = 0; s.dark = s.c.take("dark", 2, flat(0)) }, []string{"dark0.pgm: clipped", "black level"}},
		{"too dark", func(s *set) { s.response = s.c.take("flat", 2, flat(500)) }, []string{"response: mean of flat0.pgm to flat1.pgm", "more light"}},
		{"dark brighter", func(s *set) { s.dark, s.response = s.response, s.dark }, []string{"below dark", "exchanged"}},
		{"stray brighter", func(s *set) { s.stray = s.c.take("stray", 2, flat(2*diffuser)) }, []string{"stray: mean", "exchanged"}},
		{"stray darker", func(s *set) { s.c.offset = 10; s.stray = s.c.take("stray", 2, flat(0)) }, []string{"stray: mean is", "below dark"}},
		{"shadow moved in", func(s *set) {
			s.edit(&s.response[2], func(x, y int, v uint16) uint16 {
				if x >= 40 && x < 60 && y >= 40 && y < 60 {
					return v - 40
				}
				return v
			})
		}, []string{"response: flat2.pgm: against flat0.pgm: differs more than noise allows", "something moved"}},
		{"texture moved", func(s *set) {
			s.response = append(s.c.take("flat", 1, textured(0)), s.c.frame("moved.pgm", s.c.counts(textured(4))))
		}, []string{"moved.pgm", "moved"}},
		{"light leak in one dark", func(s *set) {
			s.edit(&s.dark[1], func(x, _ int, v uint16) uint16 {
				if x > 100 {
					return v + 2
				}
				return v
			})
		}, []string{"dark: dark1.pgm", "light changed"}},
		{"lamp unsteady", func(s *set) { s.response = append(s.response, s.c.take("late", 1, s.c.vignetted(0.95*diffuser))...) },
			[]string{"late0.pgm", "mean changed by", "warm up"}},
		{"copied frame", func(s *set) { s.dark[2] = s.dark[1] }, []string{"dark: dark1.pgm: same pixels as the frame before"}},
		{"count above format", func(s *set) { s.dark[0].Raw.Data[1] = 0xff }, []string{"dark0.pgm: data: count", "want at most 4095"}},
		{"too many bad", func(s *set) {
			for i := range s.response {
				s.edit(&s.response[i], func(x, y int, v uint16) uint16 {
					if x%8 == 0 && y%8 == 0 {
						return 20
					}
					return v
				})
			}
		}, []string{"bad pixels: got 192, want at most 123", "Dead:192"}},
		{"no exposure", func(s *set) { s.req.Capture.ExposureUS = 0 }, []string{"exposure_us: got 0"}},
		{"no scale", func(s *set) { s.req.Scale = pipeline.Scale{} }, []string{"um_per_px: got 0"}},
		{"no scale source", func(s *set) { s.req.Scale.Source = "" }, []string{"scale source"}},
		{"odd camera name", func(s *set) { s.req.Camera = "../x" }, []string{`camera: got "../x"`}},
	}
	for _, c := range cases {
		s := goodSet()
		c.spoil(s)
		err := s.make()
		if err == nil {
			t.Errorf("%s: no error", c.name)
			continue
		}
		for _, want := range c.want {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%s: got %q, want ...%s...", c.name, err, want)
			}
		}
		if pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: kind %v", c.name, pipeline.KindOf(err))
		}
	}
}

// A few blinking pixels are the sensor's, not movement.
func TestBlinkingPixelsAreNotMovement(t *testing.T) {
	s := goodSet()
	s.edit(&s.dark[1], func(x, y int, v uint16) uint16 {
		if x%64 == 3 && y%64 == 3 {
			return v + 900
		}
		return v
	})
	if err := s.make(); err != nil {
		t.Error(err)
	}
}

func TestMatch(t *testing.T) {
	cal := &pipeline.Calibration{Camera: "cam-1", Capture: pipeline.Capture{
		Format: raster.Mono12, Width: 640, Height: 480, ExposureUS: 1000, GainDB: 6, BlackLevel: 20, BinningX: 1, BinningY: 1,
	}}
	good := pipeline.FrameHeader{CameraID: "cam-1", Capture: cal.Capture}
	good.Format, good.BinningX, good.ExposureUS = raster.Mono12p, 0, 1000.5
	if err := cal.Match(good); err != nil {
		t.Errorf("same counts, other packing: %v", err)
	}
	nan := 0.0
	for want, change := range map[string]func(h *pipeline.FrameHeader){
		"camera: got cam-2, want cam-1":                 func(h *pipeline.FrameHeader) { h.CameraID = "cam-2" },
		"size: got 640 × 481 pixels, want 640 × 480":    func(h *pipeline.FrameHeader) { h.Height = 481 },
		"pixel_format: got Mono8 (8 bits), want Mono12": func(h *pipeline.FrameHeader) { h.Format = raster.Mono8 },
		"offset: got (0, 8), want (0, 0)":               func(h *pipeline.FrameHeader) { h.OffsetY = 8 },
		"binning: got 2 × 1, want 1 × 1":                func(h *pipeline.FrameHeader) { h.BinningX = 2 },
		"exposure_us: got 1002, want 1000":              func(h *pipeline.FrameHeader) { h.ExposureUS = 1002 },
		"exposure_us: got NaN, want 1000":               func(h *pipeline.FrameHeader) { h.ExposureUS = nan / nan },
		"gain_db: got 6.1, want 6":                      func(h *pipeline.FrameHeader) { h.GainDB = 6.1 },
		"black_level: got 21, want 20":                  func(h *pipeline.FrameHeader) { h.BlackLevel = 21 },
	} {
		h := good
		change(&h)
		if err := cal.Match(h); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want ...%s...", err, want)
		}
	}
}
