package stagetest

import (
	"context"
	"io"
	"math"
	"sync"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Maker returns an Item as the stage under test would get it, made from one frame:
// with region, planes and whatever else earlier stages of a recipe write. It is called
// often and must return equal Items for equal frames.
type Maker func(raw raster.Raw) *pipeline.Item

// Run puts a stage with its default settings through the suite. The stage is built
// with the calibration and geometry of an Item from makeItem.
func Run(t *testing.T, factory pipeline.Factory, makeItem Maker) {
	t.Helper()
	s := suite{factory, makeItem}
	t.Run("described", s.described)
	t.Run("defaults pass", s.defaultsPass)
	t.Run("twice the same", s.twiceTheSame)
	t.Run("at once", s.atOnce)
	t.Run("input unchanged", s.inputUnchanged)
	t.Run("fork", s.fork)
	t.Run("cancelled", s.cancelled)
	t.Run("odd frames", s.oddFrames)
	t.Run("close", s.close)
}

type suite struct {
	factory  pipeline.Factory
	makeItem Maker
}

// build makes the stage and closes it at the end of the test.
func (s suite) build(t *testing.T, item *pipeline.Item) pipeline.Stage {
	t.Helper()
	stage, settings, err := s.factory.New(nil, environment(item))
	if err != nil {
		t.Fatalf("New with default settings: %v", err)
	}
	if stage == nil || settings == nil {
		t.Fatal("New returned no stage or no settings")
	}
	t.Cleanup(func() {
		if err := closeStage(stage); err != nil {
			t.Errorf("Close: %v", err)
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

func (s suite) described(t *testing.T) {
	f := s.factory
	if f.Type == "" || f.Version == "" || f.Summary == "" || f.Summary[len(f.Summary)-1] != '.' {
		t.Errorf("type %q, version %q, summary %q: want all three, and a sentence", f.Type, f.Version, f.Summary)
	}
	if f.Scope != pipeline.ScopeView && f.Scope != pipeline.ScopeUnit {
		t.Errorf("scope %q, want view or unit", f.Scope)
	}
	if len(f.Writes) == 0 {
		t.Error("writes nothing")
	}
}

func (s suite) defaultsPass(t *testing.T) {
	if c, ok := s.factory.Defaults.(pipeline.Checker); ok {
		if err := c.Check(); err != nil {
			t.Errorf("default settings: %v", err)
		}
	}
	s.build(t, s.makeItem(Scene()))
}

// run runs the stage on a new Item and returns the digest of what came out.
func (s suite) run(t *testing.T, stage pipeline.Stage) string {
	t.Helper()
	item := s.makeItem(Scene())
	if err := stage.Run(context.Background(), item); err != nil {
		t.Errorf("Run: %v", err)
	}
	return Digest(item)
}

func (s suite) twiceTheSame(t *testing.T) {
	if s.factory.Stateful {
		t.Skip("keeps state")
	}
	stage := s.build(t, s.makeItem(Scene()))
	if s.run(t, stage) != s.run(t, stage) {
		t.Error("two runs on equal items differ")
	}
}

func (s suite) atOnce(t *testing.T) {
	const n = 4
	stage := s.build(t, s.makeItem(Scene()))
	want := s.run(t, stage)
	var wg sync.WaitGroup
	got := make([]string, n)
	for i := range n {
		wg.Go(func() { got[i] = s.run(t, stage) })
	}
	wg.Wait()
	for i, g := range got {
		if g != want && !s.factory.Stateful {
			t.Errorf("run %d of %d at once differs from one alone", i+1, n)
		}
	}
}

func (s suite) inputUnchanged(t *testing.T) {
	item := s.makeItem(Scene())
	before := item.Fork()
	want := Digest(before)
	if err := s.build(t, item).Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if Digest(before) != want {
		t.Error("the frames, planes, masks or lists that the stage was given have changed; want new ones")
	}
}

func (s suite) fork(t *testing.T) {
	item := s.makeItem(Scene())
	want := Digest(item)
	stage := s.build(t, item)
	a, b := item.Fork(), item.Fork()
	for _, f := range []*pipeline.Item{a, b} {
		if err := stage.Run(context.Background(), f); err != nil {
			t.Fatal(err)
		}
	}
	if Digest(item) != want {
		t.Error("a run on a fork changed the item it came from")
	}
	if Digest(a) != Digest(b) && !s.factory.Stateful {
		t.Error("two forks came out differently")
	}
}

func (s suite) cancelled(t *testing.T) {
	item := s.makeItem(Scene())
	stage := s.build(t, item)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if err := stage.Run(ctx, item); err == nil {
		t.Error("Run with a cancelled context returned no error")
	}
}

func (s suite) oddFrames(t *testing.T) {
	for name, raw := range OddFrames() {
		t.Run(name, func(t *testing.T) {
			item := s.makeItem(raw)
			defer func() {
				if r := recover(); r != nil {
					t.Errorf("panic: %v", r)
				}
			}()
			if err := s.build(t, item).Run(context.Background(), item); err != nil {
				if pipeline.KindOf(err) != pipeline.InvalidKind {
					t.Errorf("error that does not blame the input: %v", err)
				}
				return
			}
			checkNumbers(t, item)
		})
	}
}

// checkNumbers refuses numbers that are not numbers, and shares outside 0 to 1.
func checkNumbers(t *testing.T, item *pipeline.Item) {
	t.Helper()
	for _, d := range item.Defects {
		for _, v := range []float64{d.XPx, d.YPx, d.UUM, d.VUM, d.AreaUM2, d.LengthUM, d.WidthUM, d.DiameterUM, d.AngleDeg, d.Flux, d.PeakDN, d.PeakSigma, d.SNR, d.EdgeDistanceUM} {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				t.Errorf("defect %+v has a measure that is no number", d)
			}
		}
	}
	for _, m := range item.Measurements {
		if math.IsNaN(m.Value) || math.IsInf(m.Value, 0) {
			t.Errorf("measurement %s is %g", m.Name, m.Value)
		}
	}
	if s := item.Coverage.Share; !(s >= 0 && s <= 1) {
		t.Errorf("coverage %g, want 0 to 1", s)
	}
}

func (s suite) close(t *testing.T) {
	stage, _, err := s.factory.New(nil, environment(s.makeItem(Scene())))
	if err != nil {
		t.Fatal(err)
	}
	for range 2 {
		if err := closeStage(stage); err != nil {
			t.Errorf("Close of a stage that never ran, twice: %v", err)
		}
	}
}
