package main

import (
	"context"
	"fmt"
	"io"
	"iter"
	"math"
	"path/filepath"
	"time"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/render"
)

// sizingPlate has dots from a third of a pixel to two pixels on a square grid of 40 px.
func sizingPlate(umPerPx, exponent, spread float64) render.Target {
	return render.Target{Name: "sizing", Frames: 1, PitchUM: 40 * umPerPx, Columns: 35, Rows: 25, DiametersUM: []float64{18, 22, 27, 33, 41, 50},
		BackgroundDN: 6, BrightnessDN: 130, ReferenceUM: 41, FluxExponent: exponent, Spread: spread}
}

// strangers are the diameters that the curve is tried on; none is the plate's.
func strangers() []float64 { return []float64{20, 24, 30, 37, 45} }

// evaluateSizing calibrates the camera of the detection scene with dot plates whose flux
// follows different laws, and sizes other dots by flux through the stages.
func evaluateSizing(o options, progress io.Writer) (*result, error) {
	scene, _, err := configs.Load[render.Scene](filepath.Join(o.testdata, "scenes", "detect.yaml"))
	if err != nil {
		return nil, err
	}
	renderer, err := render.New(scene)
	if err != nil {
		return nil, err
	}
	r := &result{}
	for _, c := range []struct {
		name             string
		exponent, spread float64
		worst            float64 // median error, as a share
	}{{"exponent 1.2", 1.2, 0, 0.15}, {"exponent 2", 2, 0, 0.15}, {"exponent 2, flux scatters by 30 %", 2, 0.3, math.Inf(1)}} {
		fmt.Fprintf(progress, "sizing: %s\n", c.name)
		if err := r.sizing(o, renderer, c.name, sizingPlate(scene.Camera.UMPerPx, c.exponent, c.spread), c.worst); err != nil {
			return nil, fmt.Errorf("%s: %w", c.name, err)
		}
	}
	return r, nil
}

func (r *result) sizing(o options, renderer *render.Renderer, name string, plate render.Target, worst float64) error {
	made, err := calibrate.Make(plateRequest(renderer.Scene(), plate), plateInputs(renderer, plate))
	if err != nil {
		return err
	}
	curve, scale := made.Calibration.Sizing, made.Calibration.Scale
	other := plate
	other.Name, other.DiametersUM = "strangers", strangers()
	defects, truth, err := inspectPlate(o, renderer, made.Calibration, other)
	if err != nil {
		return err
	}
	errors, covered := sizeErrors(defects, truth)
	i := bootstrap(len(errors), func(drawn []int) float64 {
		v := make([]float64, len(drawn))
		for k, n := range drawn {
			v[k] = errors[n]
		}
		return median(v)
	})
	r.plain(name+": exponent fitted", curve.Exponent, curve.Dots, fmt.Sprintf("± %.3f", curve.ExponentUncertainty))
	r.plain(name+": residual stated", curve.Residual, curve.Dots, "of the diameter, standard deviation")
	r.plain(name+": scale − truth, in its uncertainties", (scale.UMPerPx-renderer.Scene().Camera.UMPerPx)/scale.UncertaintyUM, made.Provenance.Target.Dots, "dots")
	r.between(name+": |diameter by flux error|, median", median(errors), i, len(errors), "dots under twice the blur")
	if _, err := r.share(name+": within two stated uncertainties", covered, len(errors), ""); err != nil {
		return err
	}
	if !math.IsInf(worst, 1) {
		r.atMost(name+": |diameter by flux error|, median", median(errors), worst)
	}
	r.atLeast(name+": share within two stated uncertainties", float64(covered)/float64(max(len(errors), 1)), 0.9)
	return nil
}

func plateRequest(s render.Scene, plate render.Target) calibrate.Request {
	c := s.Camera
	req := calibrate.Request{Camera: c.ID, Light: "ring", Mode: "evaluation", MadeAt: "2000-01-01T00:00:00Z", Rules: calibrate.DefaultRules(),
		Capture:     pipeline.Capture{ExposureUS: c.ExposureUS, GainDB: c.GainDB, BlackLevel: c.BlackLevelDN},
		Certificate: dots.Certificate{Serial: "plate", Date: "2000-01-01", PitchUM: plate.PitchUM, UncertaintyUM: 1e-5 * plate.PitchUM}}
	for row := range plate.Rows {
		var line []float64
		for column := range plate.Columns {
			line = append(line, plate.DiametersUM[(row*plate.Columns+column)%len(plate.DiametersUM)])
		}
		req.SizingDiameters = append(req.SizingDiameters, line)
	}
	return req
}

func plateInputs(r *render.Renderer, plate render.Target) calibrate.Inputs {
	view := r.Views()[0]
	frames := func(n int, take func(i int) (pipeline.Frame, error)) iter.Seq2[calibrate.Frame, error] {
		return func(yield func(calibrate.Frame, error) bool) {
			for i := range n {
				f, err := take(i)
				if !yield(calibrate.Frame{Name: fmt.Sprint(i), Capture: f.Header.Capture, Raw: f.Raw}, err) {
					return
				}
			}
		}
	}
	kind := func(name string, n int) iter.Seq2[calibrate.Frame, error] {
		return frames(n, func(i int) (pipeline.Frame, error) { return r.CalibrationFrame(name, view, i) })
	}
	target := func(t render.Target) iter.Seq2[calibrate.Frame, error] {
		return frames(1, func(i int) (pipeline.Frame, error) { f, _, err := r.TargetFrame(view, t, i); return f, err })
	}
	large := plate
	large.Name, large.DiametersUM, large.BrightnessDN, large.FluxExponent, large.Spread = "dots", []float64{0.4 * plate.PitchUM}, 100, 2, 0
	return calibrate.Inputs{Dark: kind(render.FrameDark, 8), Stray: kind(render.FrameStray, 8), Response: kind(render.FrameResponse, 16), Dots: target(large), Sizing: target(plate)}
}

func inspectPlate(o options, r *render.Renderer, c *pipeline.Calibration, plate render.Target) ([]pipeline.Defect, []render.TargetDot, error) {
	recipe, cat, err := loadRecipe(o, "sizing")
	if err != nil {
		return nil, nil, err
	}
	view := r.Views()[0]
	line, err := build(recipe, cat, map[string]*pipeline.Calibration{view: c}, false)
	if err != nil {
		return nil, nil, err
	}
	defer line.Close()
	frame, truth, err := r.TargetFrame(view, plate, 0)
	if err != nil {
		return nil, nil, err
	}
	frame.Header.View = view
	e, _ := line.Inspect(context.Background(), identity(recipe, "plate"), []pipeline.View{{Name: view, Frames: []pipeline.Frame{frame}}}, time.Unix(0, 0))
	for _, f := range e.Failures {
		return nil, nil, fmt.Errorf("%s: %s", f.Reason, f.Detail)
	}
	return e.Views[0].Defects, truth, nil
}

// sizeErrors returns the relative errors of the dots that were sized by flux, and how many
// lie within two of their stated uncertainties.
func sizeErrors(defects []pipeline.Defect, truth []render.TargetDot) (errors []float64, covered int) {
	for _, t := range truth {
		for _, d := range defects {
			if d.DiameterFluxUM == 0 || math.Hypot(d.XPx-t.XPx, d.YPx-t.YPx) > 2 {
				continue
			}
			off := math.Abs(d.DiameterFluxUM - t.DiameterUM)
			errors = append(errors, off/t.DiameterUM)
			if off <= 2*d.DiameterFluxUncertaintyUM {
				covered++
			}
		}
	}
	return errors, covered
}
