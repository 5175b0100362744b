package stagetest

import (
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
)

// Rendered is a small rendered station with its calibrations, for tests of stages that
// need pictures whose truth is known.
type Rendered struct {
	*render.Renderer
	t            testing.TB
	Calibrations map[string]*pipeline.Calibration
}

// SmallScene is a disc of 6 mm at 20 µm/px in frames of 400 × 360 px under three lights,
// with a patch in the corner and hot pixels. Everything in it is invented.
func SmallScene() render.Scene {
	return render.Scene{Format: 1, Seed: 11, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 50, UnitsPerLot: 10,
		SerialPattern: "T%03d", LotPattern: "L%d",
		Part: render.Part{Number: "disc", DiameterMM: 6, ClearApertureMM: 5.4, MaxShiftPx: 8, Turned: true},
		Camera: render.Camera{ID: "c", Width: 400, Height: 360, UMPerPx: 20, PixelFormat: "Mono8", ExposureUS: 1000, BlackLevelDN: 6, GainDNPerE: 0.05,
			DarkNoiseE: 8, ResponseSpread: 0.01, DarkSpreadDN: 0.2, HotPixels: 25, HotPixelDN: render.Distribution{Shape: render.ShapeUniform, Min: 30, Max: 180}, BlurPx: 0.7},
		Lamp: render.Lamp{MinPower: 1, MaxPower: 1}, Reference: render.Reference{XPx: 6, YPx: 6, WidthPx: 32, HeightPx: 32},
		Views: []render.View{{Name: "ring", Light: render.LightRing, FixtureDN: 2, StrayDN: 3, ReferenceDN: 70, Vignetting: 0.2, ResponseDN: 160},
			{Name: "bar", Light: render.LightBar, AzimuthDeg: 180, DirectionExponent: 4, DirectionFloor: 0.1, Strength: 0.8, FixtureDN: 2, StrayDN: 4, ReferenceDN: 120, Vignetting: 0.3, ResponseDN: 160},
			{Name: "back", Light: render.LightBack, LevelDN: 180, StrayDN: 1, ReferenceDN: 90, Vignetting: 0.1, ResponseDN: 160}},
		Lines:     []render.Line{{Name: "A", Station: "A1"}},
		Processes: []render.Process{{Name: "p", Share: 1, HazeDN: render.Distribution{Value: 10}, HazeTexture: 0.05, RimDN: 120, RimWidthUM: 30}}}
}

// Render makes the renderer of a scene and the calibrations of its views from four frames
// of each kind.
func Render(t testing.TB, s render.Scene) *Rendered {
	t.Helper()
	r, err := render.New(s)
	if err != nil {
		t.Fatal(err)
	}
	out := &Rendered{Renderer: r, t: t, Calibrations: map[string]*pipeline.Calibration{}}
	for _, v := range s.Views {
		dark, stray, response := out.mean(render.FrameDark, v.Name), out.mean(render.FrameStray, v.Name), out.mean(render.FrameResponse, v.Name)
		raster.Subtract(stray, stray, dark)
		raster.Subtract(response, response, dark)
		sum := 0.0
		for _, p := range response.Pix {
			sum += float64(p) / float64(len(response.Pix))
		}
		for i := range response.Pix {
			response.Pix[i] = max(response.Pix[i]/float32(sum), 0.1)
		}
		shot, err := r.CalibrationFrame(render.FrameDark, v.Name, 0)
		if err != nil {
			t.Fatal(err)
		}
		c := &pipeline.Calibration{Camera: s.Camera.ID, Light: v.Light, Capture: shot.Header.Capture, Hash: "rendered " + v.Name, Dark: dark, Stray: stray, Response: response,
			Noise: pipeline.NoiseModel{GainDNPerE: s.Camera.GainDNPerE, DarkDN: 0.5}, Scale: pipeline.Scale{UMPerPx: s.Camera.UMPerPx}}
		for i, d := range dark.Pix {
			if d > float32(s.Camera.BlackLevelDN)+10 {
				at := pipeline.PixelAt{X: i % dark.Width, Y: i / dark.Width}
				c.BadPixels = append(c.BadPixels, at)
				c.FixedPattern = append(c.FixedPattern, pipeline.PatternPixel{X: at.X, Y: at.Y, DarkDN: float64(d) - s.Camera.BlackLevelDN})
			}
		}
		c.PartEdge = out.partEdge(v)
		out.Calibrations[v.Name] = c
	}
	return out
}

// partEdge measures the outline of a part without defects; nil where no circle is found.
func (r *Rendered) partEdge(v render.View) *pipeline.PartEdge {
	u := r.Unit(0)
	u.Objects, u.Spoilers, u.LampPower, u.DiameterMM = nil, nil, 1, r.Scene().Part.DiameterMM
	raw, err := r.Item(&u, v.Name).Raw()
	if err != nil {
		r.t.Fatal(err)
	}
	c, radius := r.Scene().Camera, 500*u.DiameterMM/r.Scene().Camera.UMPerPx
	fit, err := raster.FindCircle(raw, raster.CircleSearch{X: float64(c.Width-1) / 2, Y: float64(c.Height-1) / 2, Reach: float64(min(c.Width, c.Height)) / 4,
		RMin: 0.95 * radius, RMax: 1.05 * radius, DarkInside: v.Light == render.LightBack, Ridge: v.Light != render.LightBack})
	if err != nil || fit.EdgeWidth <= 0 {
		return nil
	}
	return &pipeline.PartEdge{WidthPx: fit.EdgeWidth, DiameterPx: 2 * fit.R, Frames: 1}
}

func (r *Rendered) mean(kind, view string) *raster.Plane {
	const frames = 4
	var sum *raster.Plane
	for n := range frames {
		f, err := r.CalibrationFrame(kind, view, n)
		if err != nil {
			r.t.Fatal(err)
		}
		p, err := f.Raw.Plane()
		if err != nil {
			r.t.Fatal(err)
		}
		if sum == nil {
			sum = raster.NewPlane(p.Width, p.Height)
		}
		for i, v := range p.Pix {
			sum.Pix[i] += v / frames
		}
	}
	return sum
}

// Env is what a stage of a view is built in.
func (r *Rendered) Env(view string) pipeline.Environment {
	return pipeline.Environment{View: view, Calibration: r.Calibrations[view], Calibrations: r.Calibrations,
		Geometry: pipeline.Planar{UMPerPx: r.Scene().Camera.UMPerPx}}
}

// Item takes a frame of a unit and returns the view before its first stage.
func (r *Rendered) Item(u *render.Unit, view string) *pipeline.Item {
	r.t.Helper()
	f, err := r.Frame(u, view)
	if err != nil {
		r.t.Fatal(err)
	}
	return &pipeline.Item{Identity: u.Identity, View: view, Frames: []pipeline.Frame{f}, Calibration: r.Calibrations[view], Geometry: r.Env(view).Geometry}
}
