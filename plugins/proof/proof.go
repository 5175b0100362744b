package proof

import (
	"context"

	"lapgate/pipeline"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "proof", Version: "1", Scope: pipeline.ScopeView, Stateful: true,
	Summary: "Proves light, live data and the sensor's own pattern before the view's defects count.",
	Reads:   []string{pipeline.RawPlane, "calibration", "header"},
	Writes:  []string{"proofs", "measurements"},
}, Default, build)

type stage struct {
	s       Settings
	patch   *patch // nil where light is not proven by a patch
	light   string // the calibration's; empty = unknown
	pattern []hotPixel
	memory  *memory
}

func build(s Settings, env pipeline.Environment) (pipeline.Stage, error) {
	st := &stage{s: s, memory: newMemory(s.RepeatFrames)}
	c := env.Calibration
	box, ok := s.box(c)
	if ok && c == nil && s.PhotodiodeTag == "" {
		return nil, pipeline.Invalid("patch_width_px: a patch is given but the view has no calibration to compare it with; calibrate, or use photodiode_tag")
	}
	if c == nil {
		return st, nil
	}
	st.light = c.Light
	if s.MinPatternShare > 0 {
		st.pattern = hotPixels(c)
	}
	if !ok {
		return st, nil
	}
	p, err := newPatch(box, c)
	if err != nil {
		return nil, err
	}
	p.others = otherLevels(box, env)
	st.patch = p
	return st, nil
}

// Run implements pipeline.Stage.
func (st *stage) Run(ctx context.Context, item *pipeline.Item) error {
	raw, err := item.Raw()
	if err != nil {
		return err
	}
	if len(item.Frames) == 0 {
		return pipeline.Invalid("view %q has no frame", item.View)
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	if err := st.proveLight(item, raw); err != nil {
		return err
	}
	if err := st.proveLive(item); err != nil {
		return err
	}
	st.provePattern(item, raw)
	return ctx.Err()
}
