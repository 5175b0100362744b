package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"sync/atomic"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/render"
)

// leastSigma is the noise-free peak, in sigmas of one raw pixel, from which a dig must
// be found.
const leastSigma = 8

// conformingPart is the share of the scene's limit up to which digs stay on units that
// are to conform.
const conformingPart = 0.9

// trial is the scene, and the recipe that inspects it.
type trial struct {
	renderer *render.Renderer
	line     *pipeline.Pipeline
	view     string
}

// digKey names a dig over lamp powers.
type digKey struct{ unit, object int }

// dig is an isolated dig that must be found.
type dig struct {
	key        digKey
	truePx     float64 // diameter as drawn
	peakSigma  float64 // as drawn
	pieces     int     // defects whose centre is on it; 0 = missed
	offPx      float64 // of the nearest defect's centre
	diameterPx float64 // of that defect
}

// inspected is what came of one unit.
type inspected struct {
	digs     []dig
	falses   int // defects that lie on nothing drawn
	accepted bool
	regionPx int
}

func digsOf(units []inspected) []dig {
	var out []dig
	for _, u := range units {
		out = append(out, u.digs...)
	}
	return out
}

// condition is how units are shown.
type condition struct {
	name       string
	lamp       float64 // power, 1 = nominal
	showing    int     // from 1; each lays the part down anew and has noise of its own
	conforming bool    // leave out the digs above the scene's limit before drawing
}

// units inspects the first n units under a condition.
func (t *trial) units(n int, c condition, progress io.Writer) ([]inspected, error) {
	var done atomic.Int64
	return inParallel(n, func(i int) (inspected, error) {
		out, err := t.unit(i, c)
		if k := done.Add(1); k%20 == 0 || int(k) == n {
			fmt.Fprintf(progress, "rendered, %s: %d of %d\n", c.name, k, n)
		}
		return out, err
	})
}

func (t *trial) unit(i int, c condition) (inspected, error) {
	u := t.drawn(i, c)
	frame, err := t.renderer.Frame(&u, t.view)
	if err != nil {
		return inspected{}, err
	}
	e, j := t.line.Inspect(context.Background(), u.Identity, []pipeline.View{{Name: t.view, Frames: []pipeline.Frame{frame}}}, time.Unix(0, 0))
	for _, f := range e.Failures {
		return inspected{}, fmt.Errorf("unit %d: %s: %s", i, f.Reason, f.Detail)
	}
	view := e.Views[0]
	out := inspected{accepted: j.Verdict == pipeline.Accept, regionPx: int(math.Pi * math.Pow(t.radiusPx(render.Object{DiameterUM: 1000 * t.renderer.Scene().Part.DiameterMM}), 2))}
	for _, o := range u.Objects {
		if o.Kind == pipeline.Dig && o.Isolated && o.Sightings[0].PeakSigma >= leastSigma {
			out.digs = append(out.digs, t.lookFor(o, i, view.Defects))
		}
	}
	for _, d := range view.Defects {
		if !t.onObject(d, u.Objects) {
			out.falses++
		}
	}
	return out, nil
}

// drawn returns unit i as it is to be drawn.
func (t *trial) drawn(i int, c condition) render.Unit {
	u := t.renderer.Showing(i, c.showing)
	u.LampPower = c.lamp
	if c.conforming {
		limit := conformingPart * t.renderer.Scene().Limits.DigDiameterUM
		kept := u.Objects[:0:0]
		for _, o := range u.Objects {
			if o.DiameterUM <= limit {
				kept = append(kept, o)
			}
		}
		u.Objects = kept
	}
	return u
}

func (t *trial) radiusPx(o render.Object) float64 {
	return o.DiameterUM / t.renderer.Scene().Camera.UMPerPx / 2
}

// lookFor returns the defect nearest to a dig, among those whose centre lies on it (at
// least within 2 px of its centre).
func (t *trial) lookFor(o render.Object, unit int, defects []pipeline.Defect) dig {
	s := o.Sightings[0]
	out := dig{key: digKey{unit, o.ID}, truePx: 2 * t.radiusPx(o), peakSigma: s.PeakSigma, offPx: math.Inf(1)}
	for _, d := range defects {
		off := math.Hypot(d.XPx-s.XPx, d.YPx-s.YPx)
		if off > max(2, t.radiusPx(o)) {
			continue
		}
		out.pieces++
		if off < out.offPx {
			out.offPx, out.diameterPx = off, d.DiameterPx
		}
	}
	return out
}

// blurReach is how far, in px, the light of an object reaches beyond its outline.
const blurReach = 3

// onObject reports whether the box of a defect touches an object.
func (t *trial) onObject(d pipeline.Defect, objects []render.Object) bool {
	for _, o := range objects {
		s := o.Sightings[0]
		dx := max(float64(d.Box.X0)-s.XPx, s.XPx-float64(d.Box.X1-1), 0)
		dy := max(float64(d.Box.Y0)-s.YPx, s.YPx-float64(d.Box.Y1-1), 0)
		if math.Hypot(dx, dy) <= t.radiusPx(o)+blurReach {
			return true
		}
	}
	return false
}

// calibrateView makes the calibration from the scene's own calibration frames.
func calibrateView(r *render.Renderer, v render.View) (map[string]*pipeline.Calibration, error) {
	scene := r.Scene()
	frames := func(kind string, n int) ([]calibrate.Frame, error) {
		var out []calibrate.Frame
		for i := range n {
			f, err := r.CalibrationFrame(kind, v.Name, i)
			if err != nil {
				return nil, err
			}
			out = append(out, calibrate.Frame{Name: fmt.Sprintf("%s %d", kind, i), Capture: f.Header.Capture, Raw: f.Raw})
		}
		return out, nil
	}
	dark, err := frames(render.FrameDark, scene.Calibration.Dark)
	if err != nil {
		return nil, err
	}
	stray, err := frames(render.FrameStray, scene.Calibration.Stray)
	if err != nil {
		return nil, err
	}
	response, err := frames(render.FrameResponse, scene.Calibration.Response)
	if err != nil {
		return nil, err
	}
	made, err := calibrate.Make(calibrate.Request{Camera: scene.Camera.ID, Light: v.Light, Mode: "evaluation", Capture: dark[0].Capture,
		Scale:  pipeline.Scale{UMPerPx: scene.Camera.UMPerPx, Source: "stated"},
		MadeAt: scene.Start, Rules: calibrate.DefaultRules()},
		calibrate.Inputs{Dark: calibrate.Frames(dark...), Stray: calibrate.Frames(stray...), Response: calibrate.Frames(response...)})
	return map[string]*pipeline.Calibration{v.Name: made.Calibration}, err
}
