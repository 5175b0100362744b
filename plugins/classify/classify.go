package classify

import (
	"context"
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

const summary = "Names the kind of each defect by ordered rules over its measures."

// Factory describes the stage for a unit, to stand after merge.
func Factory() pipeline.Factory { return factory("classify", pipeline.ScopeUnit) }

// ViewFactory describes the stage for one view, where kinds are wanted before the merge.
func ViewFactory() pipeline.Factory { return factory("classify_view", pipeline.ScopeView) }

func factory(typ string, scope pipeline.Scope) pipeline.Factory {
	return pipeline.Make(pipeline.Factory{
		Type: typ, Version: "1", Scope: scope, Summary: summary,
		Reads: []string{"defects"}, Writes: []string{"defects"},
	}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return New(s) })
}

// New returns the stage.
func New(s Settings) (pipeline.Stage, error) {
	compiled, err := s.compile()
	if err != nil {
		return nil, err
	}
	return &stage{compiled, pipeline.Kind(s.DefaultKind), measures()}, nil
}

type stage struct {
	rules     []compiled
	otherwise pipeline.Kind
	measures  *rules.Record[pipeline.Defect]
}

// Run implements pipeline.Stage.
func (s *stage) Run(ctx context.Context, item *pipeline.Item) error {
	found := defects(item)
	out := make([]pipeline.Defect, len(found))
	for i, d := range found {
		kind, err := s.kind(&d)
		if err != nil {
			return fmt.Errorf("defect %d of view %s: %w", d.ID, d.View, err)
		}
		d.Kind = kind
		out[i] = d
	}
	item.Defects = out
	return ctx.Err()
}

// defects returns the item's own defects or, for a unit whose views nothing has merged
// yet, those of all views: none may be lost for want of a merge.
func defects(item *pipeline.Item) []pipeline.Defect {
	if item.Defects != nil || len(item.Views) == 0 {
		return item.Defects
	}
	var out []pipeline.Defect
	for _, v := range item.Views {
		out = append(out, v.Defects...)
	}
	return out
}

// kind is that of the first rule that matches. What is told by slope keeps its kind: no
// rule may make a dig of a dent, or the limit on dents would not see it.
func (s *stage) kind(d *pipeline.Defect) (pipeline.Kind, error) {
	if !d.Kind.Scatters() {
		return d.Kind, nil
	}
	values := s.measures.Of(d)
	for i, r := range s.rules {
		is, err := r.when.Bool(values)
		if err != nil {
			return "", fmt.Errorf("rules[%d].when: %w", i, err)
		}
		if is {
			return r.kind, nil
		}
	}
	return s.otherwise, nil
}
