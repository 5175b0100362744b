package main

import (
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/raster/files"
	"lapgate/pipeline/render"
)

// patchMarginPx is left out on each side of the reference patch: its edge is blurred.
const patchMarginPx = 8

// calibrateViews makes the calibration of every view, with a page to read beside it; both
// lines have the same camera.
func (d *demo) calibrateViews() error {
	for _, v := range d.scene.Views {
		d.say("calibrating view %s", v.Name)
		made, err := calibrate.FromFolders(d.calibrationRequest(v), d.calibrationFolders(v), files.Options{})
		if err != nil {
			return err
		}
		if err := calibrate.Write(d.path("calibrations/"+v.Name), made); err != nil {
			return err
		}
		if err := writeCalibrationPage(d.path("calibration/"+v.Name+".html"), made); err != nil {
			return err
		}
	}
	return nil
}

func (d *demo) calibrationRequest(v render.View) calibrate.Request {
	c := d.scene.Camera
	req := calibrate.Request{Camera: c.ID, Light: v.Light, Mode: "demo",
		Capture: pipeline.Capture{ExposureUS: c.ExposureUS, GainDB: c.GainDB, BlackLevel: c.BlackLevelDN},
		MadeAt:  time.Now().UTC().Format(time.RFC3339), Rules: calibrate.DefaultRules()}
	if r := d.scene.Reference; r.WidthPx > 4*patchMarginPx && r.HeightPx > 4*patchMarginPx {
		req.Patch = &pipeline.Box{X0: r.XPx + patchMarginPx, Y0: r.YPx + patchMarginPx, X1: r.XPx + r.WidthPx - patchMarginPx, Y1: r.YPx + r.HeightPx - patchMarginPx}
	}
	req.Part = calibrate.PartSearch{DiameterMM: d.scene.Part.DiameterMM, Polarity: "rim"}
	if v.Light == render.LightBack {
		req.Part.Polarity = "dark"
	}
	target, ok := d.target("dots")
	if !ok {
		req.Scale = pipeline.Scale{UMPerPx: c.UMPerPx, Source: "stated"}
		return req
	}
	req.Certificate = dots.Certificate{Serial: "demo-plate", Date: d.scene.Start[:len(time.DateOnly)], PitchUM: target.PitchUM, UncertaintyUM: 1e-4 * target.PitchUM}
	if sizing, ok := d.target("sizing"); ok {
		for row := range sizing.Rows {
			var line []float64
			for column := range sizing.Columns {
				line = append(line, sizing.DiametersUM[(row*sizing.Columns+column)%len(sizing.DiametersUM)])
			}
			req.SizingDiameters = append(req.SizingDiameters, line)
		}
	}
	return req
}

func (d *demo) calibrationFolders(v render.View) calibrate.Folders {
	from := func(kind string) string { return d.path("calibration/" + v.Name + "/" + kind) }
	f := calibrate.Folders{Dark: from("dark"), Stray: from("stray"), Response: from("response")}
	if d.scene.Calibration.Part > 0 {
		f.Part = from("part")
	}
	if _, ok := d.target("dots"); ok {
		f.Dots = from("dots")
	}
	if _, ok := d.target("sizing"); ok {
		f.Sizing = from("sizing")
	}
	return f
}

func (d *demo) target(name string) (render.Target, bool) {
	for _, t := range d.scene.Calibration.Targets {
		if t.Name == name {
			return t, true
		}
	}
	return render.Target{}, false
}
