package limits

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lapgate/pipeline"
)

// Spec is one limit as a recipe states it.
type Spec struct {
	Name               string   // the reason's name
	Zone               string   // only defects of this zone; empty = all
	Kind               string   // only defects of this kind; empty = all
	Each               string   // expression about one defect
	Value              string   // number over the list "defects"
	Broken             string   // condition over the list "defects"
	AtMost             *float64 // upper limit of each or value
	AtLeast            *float64 // lower limit of each or value
	Unit               string   // of the value and its limits: "um", "um2", "mm" …
	Uncertainty        float64  // expanded uncertainty of the value, in Unit; 0 = none stated
	UncertaintyPercent float64  // the same in % of the value; 0 = none stated
	Verdict            string   // what a broken limit calls for: "reject" (also when empty) or "hold"
}

// Mistake is something wrong with one Spec.
type Mistake struct {
	Limit        int    // index in the list
	Key          string // the key it is about, in lower_snake_case
	Line, Column int    // within the expression, 1-based; 0 = the whole value
	Message      string
}

// Mistakes is what New returns for faulty limits.
type Mistakes []Mistake

// Error returns one mistake a line.
func (m Mistakes) Error() string {
	var lines []string
	for _, one := range m {
		at := ""
		if one.Line > 0 {
			at = fmt.Sprintf(":%d:%d", one.Line, one.Column)
		}
		lines = append(lines, fmt.Sprintf("limits[%d].%s%s: %s", one.Limit, one.Key, at, one.Message))
	}
	return strings.Join(lines, "\n")
}

const maxName = 64

// check returns what can be said against a Spec without compiling it, key by key.
func (s Spec) check() []Mistake {
	var out []Mistake
	wrong := func(bad bool, key, format string, args ...any) {
		if bad {
			out = append(out, Mistake{Key: key, Message: fmt.Sprintf(format, args...)})
		}
	}
	wrong(s.Name == "" || len(s.Name) > maxName, "name", "got %q, want 1 to %d characters: the name becomes the reason", s.Name, maxName)
	wrong(s.Kind != "" && !slices.Contains(pipeline.Kinds(), pipeline.Kind(s.Kind)), "kind", "got %q, want one of %s", s.Kind, kindList())
	wrong(!slices.Contains([]string{"", "reject", "hold"}, s.Verdict), "verdict", "got %q, want reject or hold", s.Verdict)
	forms := s.forms()
	wrong(len(forms) != 1, "name", "got %s, want exactly one of each, value and broken", orNone(forms))
	bounded := s.AtMost != nil || s.AtLeast != nil
	wrong(s.Value != "" && !bounded, "value", "no limit is given; add at_most or at_least")
	wrong(s.Broken != "" && bounded, "broken", "a condition has no at_most or at_least; use value")
	wrong(bounded && s.Unit == "", "unit", "not given; state the unit of the limit (um, um2, mm, 1 for a count)")
	wrong(s.AtMost != nil && !isFinite(*s.AtMost), "at_most", "want a finite number")
	wrong(s.AtLeast != nil && !isFinite(*s.AtLeast), "at_least", "want a finite number")
	wrong(s.AtMost != nil && s.AtLeast != nil && *s.AtMost < *s.AtLeast, "at_least", "got %s, want no more than at_most", number(s.AtLeast))
	return append(out, s.checkUncertainty(bounded)...)
}

func (s Spec) checkUncertainty(bounded bool) []Mistake {
	var out []Mistake
	for _, u := range []struct {
		key   string
		value float64
	}{{"uncertainty", s.Uncertainty}, {"uncertainty_percent", s.UncertaintyPercent}} {
		if !isFinite(u.value) || u.value < 0 {
			out = append(out, Mistake{Key: u.key, Message: fmt.Sprintf("got %v, want 0 or more", u.value)})
		}
		if u.value > 0 && !bounded {
			out = append(out, Mistake{Key: u.key, Message: "needs at_most or at_least"})
		}
	}
	if s.Uncertainty > 0 && s.UncertaintyPercent > 0 {
		out = append(out, Mistake{Key: "uncertainty_percent", Message: "uncertainty is given too; state one of the two"})
	}
	return out
}

// forms returns the keys of the forms that are filled in.
func (s Spec) forms() []string {
	var out []string
	for _, f := range []struct{ key, text string }{{"each", s.Each}, {"value", s.Value}, {"broken", s.Broken}} {
		if f.text != "" {
			out = append(out, f.key)
		}
	}
	return out
}

func orNone(keys []string) string {
	if len(keys) == 0 {
		return "none"
	}
	return strings.Join(keys, " and ")
}

func kindList() string {
	var out []string
	for _, k := range pipeline.Kinds() {
		out = append(out, string(k))
	}
	return strings.Join(out, ", ")
}

func isFinite(f float64) bool { return !math.IsNaN(f) && !math.IsInf(f, 0) }

func number(f *float64) string {
	if f == nil {
		return "-"
	}
	return fmt.Sprintf("%g", *f)
}
