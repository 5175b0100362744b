package stagetest

import (
	"context"
	"fmt"
	"io"
	"math"
	"sync"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Maker returns an Item as the stage under test would get it, made from one frame:
// with region, planes and whatever else earlier stages of a recipe write. It is called
// often and must return equal Items for equal frames.
type Maker func(raw raster.Raw) *pipeline.Item

type suite struct {
	factory  pipeline.Factory
	makeItem Maker
}

type property struct {
	name, wanted string
	check        func(*report)
}

func (s suite) properties() []property {
	return []property{
		{"described", "Type, version and a sentence are given, scope is view or unit, and something is written.", s.described},
		{"defaults pass", "The default settings pass their own check, and the stage can be built with them.", s.defaultsPass},
		{"twice the same", "Two runs on equal items give equal results to the last bit.", s.twiceTheSame},
		{"at once", "Runs at the same time give what one alone gives.", s.atOnce},
		{"input unchanged", "Frames, planes, masks and lists that were given stay as they were.", s.inputUnchanged},
		{"fork", "A run on a fork leaves the item that it came from alone.", s.fork},
		{"cancelled", "A run with a cancelled context returns an error.", s.cancelled},
		{"odd frames", "Tiny, empty, saturated and chequered frames give finite numbers, or an error that blames the input.", s.oddFrames},
		{"close", "A stage that never ran can be closed, and twice.", s.close},
	}
}

// build makes the stage; it is closed when the property has been looked at.
func (s suite) build(r *report, item *pipeline.Item) pipeline.Stage {
	stage, settings, err := s.factory.New(nil, environment(item))
	if err == nil && (stage == nil || settings == nil) {
		r.wrong("New returned no stage or no settings")
		return nil
	}
	if err != nil {
		r.wrong("New with default settings: %v", err)
		return nil
	}
	r.cleanups = append(r.cleanups, func() {
		if err := closeStage(stage); err != nil {
			r.wrong("Close: %v", err)
		}
	})
	return stage
}

func environment(item *pipeline.Item) pipeline.Environment {
	return pipeline.Environment{View: item.View, Calibration: item.Calibration, Geometry: item.Geometry}
}

func closeStage(stage pipeline.Stage) error {
	if c, ok := stage.(io.Closer); ok {
		return c.Close()
	}
	return nil
}

func (s suite) described(r *report) {
	f := s.factory
	if f.Type == "" || f.Version == "" || f.Summary == "" || f.Summary[len(f.Summary)-1] != '.' {
		r.wrong("type %q, version %q, summary %q: want all three, and a sentence", f.Type, f.Version, f.Summary)
	}
	if f.Scope != pipeline.ScopeView && f.Scope != pipeline.ScopeUnit {
		r.wrong("scope %q, want view or unit", f.Scope)
	}
	if len(f.Writes) == 0 {
		r.wrong("writes nothing")
	}
}

func (s suite) defaultsPass(r *report) {
	var err error
	if c, ok := s.factory.Defaults.(pipeline.Checker); ok {
		err = c.Check()
	} else if s.factory.Check != nil {
		err = s.factory.Check(s.factory.Defaults)
	}
	if err != nil {
		r.wrong("default settings: %v", err)
	}
	s.build(r, s.makeItem(Scene()))
}

// run runs the stage on a new Item and returns the digest of what came out.
func (s suite) run(stage pipeline.Stage) (digest string, err error) {
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("panic: %v", p)
		}
	}()
	item := s.makeItem(Scene())
	err = stage.Run(context.Background(), item)
	return Digest(item), err
}

func (s suite) twiceTheSame(r *report) {
	if s.factory.Stateful {
		r.skipped = "it keeps state"
		return
	}
	stage := s.build(r, s.makeItem(Scene()))
	if stage == nil {
		return
	}
	first, err := s.run(stage)
	second, err2 := s.run(stage)
	if err != nil || err2 != nil {
		r.wrong("Run: %v, then %v", err, err2)
	}
	if first != second {
		r.wrong("two runs on equal items differ")
	}
}

func (s suite) atOnce(r *report) {
	const n = 4
	stage := s.build(r, s.makeItem(Scene()))
	if stage == nil {
		return
	}
	want, err := s.run(stage)
	if err != nil {
		r.wrong("Run: %v", err)
	}
	var wg sync.WaitGroup
	got, errs := make([]string, n), make([]error, n)
	for i := range n {
		wg.Go(func() { got[i], errs[i] = s.run(stage) })
	}
	wg.Wait()
	for i := range n {
		if errs[i] != nil {
			r.wrong("run %d of %d at once: %v", i+1, n, errs[i])
		}
		if got[i] != want && !s.factory.Stateful {
			r.wrong("run %d of %d at once differs from one alone", i+1, n)
		}
	}
}

func (s suite) inputUnchanged(r *report) {
	item := s.makeItem(Scene())
	before := item.Fork()
	want := Digest(before)
	stage := s.build(r, item)
	if stage == nil {
		return
	}
	if err := stage.Run(context.Background(), item); err != nil {
		r.wrong("Run: %v", err)
	}
	if Digest(before) != want {
		r.wrong("the frames, planes, masks or lists that the stage was given have changed; want new ones")
	}
}

func (s suite) fork(r *report) {
	item := s.makeItem(Scene())
	want := Digest(item)
	stage := s.build(r, item)
	if stage == nil {
		return
	}
	a, b := item.Fork(), item.Fork()
	for _, f := range []*pipeline.Item{a, b} {
		if err := stage.Run(context.Background(), f); err != nil {
			r.wrong("Run: %v", err)
		}
	}
	if Digest(item) != want {
		r.wrong("a run on a fork changed the item it came from")
	}
	if Digest(a) != Digest(b) && !s.factory.Stateful {
		r.wrong("two forks came out differently")
	}
}

func (s suite) cancelled(r *report) {
	item := s.makeItem(Scene())
	stage := s.build(r, item)
	if stage == nil {
		return
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if err := stage.Run(ctx, item); err == nil {
		r.wrong("Run with a cancelled context returned no error")
	}
}

func (s suite) oddFrames(r *report) {
	for name, raw := range OddFrames() {
		one := &report{}
		one.guard(func() { s.oddFrame(one, raw) })
		one.close()
		for _, f := range one.findings {
			r.wrong("%s: %s", name, f)
		}
	}
}

func (s suite) oddFrame(r *report, raw raster.Raw) {
	item := s.makeItem(raw)
	stage := s.build(r, item)
	if stage == nil {
		return
	}
	if err := stage.Run(context.Background(), item); err != nil {
		if pipeline.KindOf(err) != pipeline.InvalidKind {
			r.wrong("error that does not blame the input: %v", err)
		}
		return
	}
	checkNumbers(r, item)
}

// checkNumbers refuses numbers that are not numbers, and shares outside 0 to 1.
func checkNumbers(r *report, item *pipeline.Item) {
	for _, d := range item.Defects {
		for _, v := range []float64{d.XPx, d.YPx, d.UUM, d.VUM, d.AreaUM2, d.LengthUM, d.WidthUM, d.DiameterUM, d.AngleDeg, d.Flux, d.PeakDN, d.PeakSigma, d.SNR, d.EdgeDistanceUM, d.SlopeMrad} {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				r.wrong("defect %+v has a measure that is no number", d)
			}
		}
	}
	for _, m := range item.Measurements {
		if math.IsNaN(m.Value) || math.IsInf(m.Value, 0) {
			r.wrong("measurement %s is %g", m.Name, m.Value)
		}
	}
	if s := item.Coverage.Share; !(s >= 0 && s <= 1) {
		r.wrong("coverage %g, want 0 to 1", s)
	}
}

func (s suite) close(r *report) {
	stage, _, err := s.factory.New(nil, environment(s.makeItem(Scene())))
	if err != nil {
		r.wrong("New: %v", err)
		return
	}
	for range 2 {
		if err := closeStage(stage); err != nil {
			r.wrong("Close of a stage that never ran, twice: %v", err)
		}
	}
}
