package main

import (
	"context"
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/raster/fused"
	"lapgate/pipeline/render"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
)

// chain is the stages up to the snr plane, with a calibration of the scene's own frames.
type chain struct {
	view        string
	calibration *pipeline.Calibration
	geometry    pipeline.Geometry
	stages      []pipeline.Stage
	correction  *fused.Correction // the calibration made ready for the fused pass; made by the first frame
}

func newChain(r *render.Renderer, view string) (*chain, error) {
	s := r.Scene()
	c := &chain{view: view, geometry: pipeline.Planar{UMPerPx: s.Camera.UMPerPx}}
	made, err := calibrated(r, view)
	if err != nil {
		return nil, err
	}
	c.calibration = made
	env := pipeline.Environment{View: view, Calibration: made, Geometry: c.geometry}
	for _, f := range []pipeline.Factory{region.Factory, flatfield.Factory, darkfield.Factory} {
		stage, _, err := f.New(decode(f.Type, s.Part), env)
		if err != nil {
			return nil, err
		}
		c.stages = append(c.stages, stage)
	}
	return c, nil
}

// decode sets the region to the part's clear aperture; other stages keep their defaults.
func decode(typ string, part render.Part) pipeline.Decode {
	if typ != region.Factory.Type {
		return nil
	}
	return func(dst any) error {
		s := dst.(*region.Settings)
		s.Shape, s.Polarity, s.DiameterMM, s.DiameterToleranceMM = region.FoundCircle, "rim", part.DiameterMM, 0.1
		s.Zones = []region.ZoneSettings{{Name: "clear", DiameterMM: part.ClearApertureMM}}
		return nil
	}
}

// run takes a frame to the snr plane.
func (c *chain) run(f pipeline.Frame) (*pipeline.Item, error) {
	item := &pipeline.Item{View: c.view, Frames: []pipeline.Frame{f}, Calibration: c.calibration, Geometry: c.geometry}
	for _, s := range c.stages {
		if err := s.Run(context.Background(), item); err != nil {
			return nil, err
		}
	}
	for _, p := range item.Proofs {
		if !p.OK {
			return nil, fmt.Errorf("unit %s: %s", f.Header.Unit, p.Reason)
		}
	}
	return item, nil
}

// calibrated makes a calibration of the scene's calibration frames.
func calibrated(r *render.Renderer, view string) (*pipeline.Calibration, error) {
	n := r.Scene().Calibration
	dark, err := frames(r, view, "dark", n.Dark)
	if err != nil {
		return nil, err
	}
	stray, err := frames(r, view, "stray", n.Stray)
	if err != nil {
		return nil, err
	}
	response, err := frames(r, view, "response", n.Response)
	if err != nil {
		return nil, err
	}
	made, err := calibrate.Make(calibrate.Request{Camera: r.Scene().Camera.ID, Light: view, Mode: "crosscheck", Capture: dark[0].Capture,
		Scale: pipeline.Scale{UMPerPx: r.Scene().Camera.UMPerPx, Source: "stated"}, MadeAt: r.Scene().Start, Rules: calibrate.DefaultRules()},
		calibrate.Inputs{Dark: calibrate.Frames(dark...), Stray: calibrate.Frames(stray...), Response: calibrate.Frames(response...)})
	return made.Calibration, err
}

func frames(r *render.Renderer, view, kind string, n int) ([]calibrate.Frame, error) {
	if n < 1 {
		return nil, fmt.Errorf("the scene has no %s frames; want some", kind)
	}
	var out []calibrate.Frame
	for i := range n {
		f, err := r.CalibrationFrame(kind, view, i)
		if err != nil {
			return nil, err
		}
		out = append(out, calibrate.Frame{Name: fmt.Sprintf("%s-%02d", kind, i), Capture: f.Header.Capture, Raw: f.Raw})
	}
	return out, nil
}
