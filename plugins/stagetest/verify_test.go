package stagetest

import (
	"context"
	"errors"
	"math"
	"slices"
	"sync/atomic"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

type noSettings struct{}

// Check implements pipeline.Checker.
func (noSettings) Check() error { return nil }

func plainItem(raw raster.Raw) *pipeline.Item {
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 10}}
	item.SetPlane("snr", "sigma", raster.NewPlane(4, 4))
	return item
}

func stageOf(f func(ctx context.Context, item *pipeline.Item) error) pipeline.Factory {
	return pipeline.Make(pipeline.Factory{Type: "probe", Version: "1", Summary: "Probes.", Scope: pipeline.ScopeView, Writes: []string{"defects"}},
		noSettings{}, func(noSettings, pipeline.Environment) (pipeline.Stage, error) { return pipeline.StageFunc(f), nil })
}

// Each fault is found by the property that is about it, and a good stage by none.
func TestVerifyFindsFaults(t *testing.T) {
	var runs atomic.Int64
	for fault, c := range map[string]struct {
		factory pipeline.Factory
		fails   string
	}{
		"none": {stageOf(func(ctx context.Context, _ *pipeline.Item) error { return ctx.Err() }), ""},
		"deaf": {stageOf(func(context.Context, *pipeline.Item) error { return nil }), "cancelled"},
		"counts": {stageOf(func(ctx context.Context, i *pipeline.Item) error {
			i.Measure("n", float64(runs.Add(1)), "")
			return ctx.Err()
		}), "twice the same"},
		"paints":      {stageOf(func(ctx context.Context, i *pipeline.Item) error { i.Planes["snr"].Pixels.Pix[0]++; return ctx.Err() }), "input unchanged"},
		"infinite":    {stageOf(func(ctx context.Context, i *pipeline.Item) error { i.Measure("x", math.Inf(1), ""); return ctx.Err() }), "odd frames"},
		"complains":   {stageOf(func(context.Context, *pipeline.Item) error { return errors.New("no") }), "odd frames"},
		"panics":      {stageOf(func(context.Context, *pipeline.Item) error { panic("no") }), "fork"},
		"no sentence": {pipeline.Factory{Type: "probe", New: stageOf(nil).New}, "described"},
	} {
		var failed []string
		for _, v := range Verify(c.factory, plainItem) {
			if !v.Pass {
				failed = append(failed, v.Property)
			}
			if v.Pass != (len(v.Findings) == 0) || v.Wanted == "" {
				t.Errorf("%s: got %+v", fault, v)
			}
		}
		if c.fails == "" && len(failed) > 0 || c.fails != "" && !slices.Contains(failed, c.fails) {
			t.Errorf("%s: failed %q, want %q", fault, failed, c.fails)
		}
	}
}
