package main

import (
	"context"
	"fmt"
	"io"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"time"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/render"
	"lapgate/plugins/builtin"
)

// bench is the station: scene, recipe and the calibrations made of the scene's frames.
type bench struct {
	scene        render.Scene
	recipe       *pipeline.Recipe
	catalogue    *pipeline.Catalogue
	calibrations map[string]*pipeline.Calibration
}

func newBench(dir string, seed uint64) (*bench, error) {
	b := &bench{calibrations: map[string]*pipeline.Calibration{}}
	var err error
	if b.scene, _, err = configs.Load[render.Scene](filepath.Join(dir, "scene.yaml")); err != nil {
		return nil, err
	}
	if seed != 0 {
		b.scene.Seed = seed
	}
	if b.catalogue, err = builtin.Catalogue(); err != nil {
		return nil, err
	}
	if b.recipe, err = configs.LoadRecipe(filepath.Join(dir, "recipe.yaml"), b.catalogue); err != nil {
		return nil, err
	}
	r, err := render.New(b.scene)
	if err != nil {
		return nil, err
	}
	for _, v := range b.scene.Views {
		if b.calibrations[v.Name], err = calibrated(r, v); err != nil {
			return nil, fmt.Errorf("view %s: %w", v.Name, err)
		}
	}
	return b, nil
}

func calibrated(r *render.Renderer, v render.View) (*pipeline.Calibration, error) {
	s := r.Scene()
	frames := map[string][]calibrate.Frame{}
	for kind, n := range map[string]int{render.FrameDark: s.Calibration.Dark, render.FrameStray: s.Calibration.Stray, render.FrameResponse: s.Calibration.Response} {
		for i := range n {
			f, err := r.CalibrationFrame(kind, v.Name, i)
			if err != nil {
				return nil, err
			}
			frames[kind] = append(frames[kind], calibrate.Frame{Name: fmt.Sprintf("%s-%02d", kind, i), Capture: f.Header.Capture, Raw: f.Raw})
		}
	}
	ref := s.Reference
	made, err := calibrate.Make(calibrate.Request{Camera: s.Camera.ID, Light: v.Light, Mode: "spoil", Capture: frames[render.FrameDark][0].Capture,
		Scale: pipeline.Scale{UMPerPx: s.Camera.UMPerPx, Source: "stated"}, MadeAt: s.Start, Rules: calibrate.DefaultRules(),
		Patch: &pipeline.Box{X0: ref.XPx, Y0: ref.YPx, X1: ref.XPx + ref.WidthPx, Y1: ref.YPx + ref.HeightPx}},
		calibrate.Inputs{Dark: calibrate.Frames(frames[render.FrameDark]...), Stray: calibrate.Frames(frames[render.FrameStray]...), Response: calibrate.Frames(frames[render.FrameResponse]...)})
	return made.Calibration, err
}

// showAll shows every fault, a few at a time, and keeps their order.
func (b *bench) showAll(o options, progress io.Writer) ([]result, error) {
	list := slices.DeleteFunc(faults(), func(f fault) bool { return o.only != "" && f.name != o.only })
	if len(list) == 0 {
		return nil, fmt.Errorf("--only: got %q, want one of %s", o.only, strings.Join(names(), ", "))
	}
	results, errs := make([]result, len(list)), make([]error, len(list))
	next := make(chan int)
	var wg sync.WaitGroup
	var say sync.Mutex
	for range max(o.workers, 1) {
		wg.Go(func() {
			for i := range next {
				results[i], errs[i] = b.show(list[i], o.units)
				say.Lock()
				fmt.Fprintf(progress, "spoil: %s: %d units in %.1f s\n", list[i].name, results[i].Units, results[i].seconds)
				say.Unlock()
			}
		})
	}
	for i := range list {
		next <- i
	}
	close(next)
	wg.Wait()
	for i, err := range errs {
		if err != nil {
			return nil, fmt.Errorf("%s: %w", list[i].name, err)
		}
	}
	return results, nil
}

func names() []string {
	var out []string
	for _, f := range faults() {
		out = append(out, f.name)
	}
	return out
}

// show shows units one after the other to a pipeline of their own.
func (b *bench) show(f fault, units int) (result, error) {
	begun := time.Now()
	scene := b.scene
	if f.unitOne {
		units++
	}
	scene.Units = units
	if f.spoil != nil {
		for i := range units {
			sp := *f.spoil
			sp.Unit = i
			scene.Spoilers = append(scene.Spoilers, sp)
		}
	}
	r, err := render.New(scene)
	if err != nil {
		return result{}, err
	}
	p, err := pipeline.Build(b.recipe, b.catalogue, pipeline.Options{Calibrations: b.calibrations, ProgramVersion: "spoil"})
	if err != nil {
		return result{}, err
	}
	defer p.Close()
	out := newResult(f)
	var before []pipeline.View
	for i := range units {
		u := r.Unit(i)
		if f.add != nil {
			f.add(&u, rand.New(rand.NewPCG(uint64(i), 1)))
		}
		views, _, err := r.Shoot(u)
		if err != nil {
			return result{}, err
		}
		if f.tamper != nil {
			views = f.tamper(views, before)
			before = views
		}
		e, j := p.Inspect(context.Background(), u.Identity, views, u.Captured)
		if i > 0 || !f.unitOne {
			out.count(f, e, j)
		}
	}
	out.seconds = time.Since(begun).Seconds()
	return out, nil
}
