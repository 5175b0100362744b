package classify

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

// Settings of the stage.
type Settings struct {
	// Rules are tried from the first to the last. An empty list gives every defect the
	// default kind.
	Rules []Rule `json:"rules" yaml:"rules"`
	// DefaultKind is the kind of a defect that no rule knows; it cannot be empty.
	DefaultKind string `json:"default_kind" yaml:"default_kind"`
}

// Rule gives a kind to the defects for which a condition is true.
type Rule struct {
	// Kind is one of pipeline.Kinds.
	Kind string `json:"kind" yaml:"kind"`
	// When is the condition, over the names that Names lists.
	When string `json:"when" yaml:"when"`
}

// Default tells long from short: a scratch is at least four times as long as it is wide
// (common practice is a ratio of 3 to 5), everything else is a dig.
var Default = Settings{
	Rules:       []Rule{{Kind: string(pipeline.Scratch), When: "length_um >= 4 * width_um"}},
	DefaultKind: string(pipeline.Dig),
}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	_, err := s.compile()
	return err
}

type compiled struct {
	kind pipeline.Kind
	when *rules.Program
}

// compile returns the rules ready to run, or every mistake in them.
func (s Settings) compile() ([]compiled, error) {
	var out []compiled
	var wrong []error
	if err := checkKind("default_kind", s.DefaultKind); err != nil {
		wrong = append(wrong, err)
	}
	vars := measures().Vars()
	for i, r := range s.Rules {
		if err := checkKind(fmt.Sprintf("rules[%d].kind", i), r.Kind); err != nil {
			wrong = append(wrong, err)
		}
		when, err := rules.Compile(r.When, vars, rules.Truth)
		if err != nil {
			wrong = append(wrong, fmt.Errorf("rules[%d].when: %w", i, err))
		}
		out = append(out, compiled{pipeline.Kind(r.Kind), when})
	}
	return out, errors.Join(wrong...)
}

func checkKind(key, kind string) error {
	if slices.Contains(pipeline.Kinds(), pipeline.Kind(kind)) {
		return nil
	}
	var names []string
	for _, k := range pipeline.Kinds() {
		names = append(names, string(k))
	}
	hint := ""
	if near := rules.Nearest(kind, names); near != "" {
		hint = fmt.Sprintf(" (did you mean %q?)", near)
	}
	return fmt.Errorf("%s: got %q, want one of %s%s", key, kind, strings.Join(names, ", "), hint)
}
