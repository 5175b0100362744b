package proof

import (
	"context"
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/drift"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "proof", Version: "2", Scope: pipeline.ScopeView, Stateful: true,
	Summary: "Proves light, live data and the sensor's own pattern before the view's defects count.",
	Reads:   []string{pipeline.RawPlane, "calibration", "header"},
	Writes:  []string{"proofs", "measurements"},
}, Default, build)

type stage struct {
	s      Settings
	patch  *drift.Patch // nil where light is not proven by a patch
	others []otherLevel
	light  string // the calibration's; empty = unknown
	memory *memory
}

func build(s Settings, env pipeline.Environment) (pipeline.Stage, error) {
	st := &stage{s: s, memory: newMemory(s.RepeatFrames)}
	if env.Earlier != nil && s.RepeatFrames > 0 {
		earlier, err := env.Earlier(s.RepeatFrames)
		if err != nil {
			return nil, fmt.Errorf("repeat_frames: what the station showed before: %w", err)
		}
		st.memory.recall(earlier)
	}
	c := env.Calibration
	box, ok := s.box(c)
	if ok && c == nil && s.PhotodiodeTag == "" {
		return nil, pipeline.Invalid("patch_width_px: a patch is given but the view has no calibration to compare it with; calibrate, or use photodiode_tag")
	}
	if c == nil {
		return st, nil
	}
	st.light = c.Light
	if !ok || s.Light.Off() {
		return st, nil
	}
	p, err := drift.NewPatch(c, box)
	if err != nil {
		return nil, pipeline.Invalid("patch_width_px: %w", err)
	}
	st.patch, st.others = &p, otherLevels(box, env)
	return st, nil
}

// Run implements pipeline.Stage.
func (st *stage) Run(ctx context.Context, item *pipeline.Item) error {
	if len(item.Frames) == 0 {
		return pipeline.Invalid("view %q has no frame", item.View)
	}
	planes := make([]*raster.Plane, len(item.Frames))
	for i := range planes {
		var err error
		if planes[i], err = planeOf(item, i); err != nil {
			return err
		}
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	if err := st.proveLight(item, planes); err != nil {
		return err
	}
	st.proveLive(item, planes)
	st.provePattern(item, planes)
	return ctx.Err()
}

// provePattern gives one proof over all frames of the view; none where the calibration's
// pattern is too faint in this light to be told.
func (st *stage) provePattern(item *pipeline.Item, planes []*raster.Plane) {
	if st.s.Pattern.Off() || item.Calibration == nil {
		return
	}
	var worst *drift.Reading
	for i, plane := range planes {
		r, ok := drift.Pattern(plane, item.Frames[i].Raw.Format.MaxCount(), item.Calibration, st.s.Pattern)
		if ok && worst != nil {
			r = drift.Worse(*worst, r)
		}
		if ok {
			worst = &r
		}
	}
	if worst != nil {
		item.Prove(worst.Proof())
	}
}
