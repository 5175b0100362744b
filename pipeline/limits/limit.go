package limits

import (
	"errors"
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

// limit is a Spec ready to run.
type limit struct {
	Spec
	record *rules.Record[pipeline.Defect]
	rule   *rules.Program
}

// compile returns the limit, or what is wrong with its Spec.
func compile(s Spec, record *rules.Record[pipeline.Defect]) (*limit, []Mistake) {
	out := s.check()
	for _, form := range s.forms() {
		vars, want := listVars(record), rules.Number
		text := map[string]string{"each": s.Each, "value": s.Value, "broken": s.Broken}[form]
		if form == "each" {
			vars = record.Vars()
		}
		if form == "broken" || form == "each" && !s.bounded() {
			want = rules.Truth
		}
		rule, err := rules.Compile(text, vars, want)
		if err != nil {
			out = append(out, ruleMistakes(form, err)...)
			continue
		}
		if out == nil {
			return &limit{s, record, rule}, nil
		}
	}
	return nil, out
}

// listVars are the names that value and broken can use.
func listVars(record *rules.Record[pipeline.Defect]) []rules.Var {
	return []rules.Var{record.Var("defects"), {Name: "coverage", Type: rules.Number}, {Name: "zone_area_mm2", Type: rules.Number}}
}

func ruleMistakes(key string, err error) []Mistake {
	var all rules.SyntaxErrors
	if !errors.As(err, &all) {
		return []Mistake{{Key: key, Message: err.Error()}}
	}
	var out []Mistake
	for _, e := range all {
		out = append(out, Mistake{Key: key, Line: e.Line, Column: e.Column, Message: e.Message})
	}
	return out
}

func (s Spec) bounded() bool { return s.AtMost != nil || s.AtLeast != nil }

// judge returns a reason for every way in which the limit is broken or cannot be
// judged. whole says that the evidence lacks nothing.
func (l *limit) judge(e pipeline.Evidence, whole bool) []pipeline.Reason {
	if zones := zoneNames(e); l.Zone != "" && !slices.Contains(zones, l.Zone) {
		return []pipeline.Reason{l.unjudged(0, fmt.Sprintf("zone %q is not in the region (has %s)", l.Zone, listOrNone(zones)))}
	}
	if l.Each == "" {
		return l.judgeList(e, l.narrow(e.Defects), whole)
	}
	var out []pipeline.Reason
	for i := range e.Defects {
		if d := &e.Defects[i]; l.about(d) {
			out = append(out, l.judgeDefect(d, whole)...)
		}
	}
	return out
}

// about reports whether the limit is about a defect at all.
func (l *limit) about(d *pipeline.Defect) bool {
	return (l.Zone == "" || d.Zone == l.Zone) && (l.Kind == "" || d.Kind == pipeline.Kind(l.Kind))
}

// narrow returns the defects that the limit is about.
func (l *limit) narrow(all []pipeline.Defect) []pipeline.Defect {
	out := make([]pipeline.Defect, 0, len(all))
	for i := range all {
		if l.about(&all[i]) {
			out = append(out, all[i])
		}
	}
	return out
}

func (l *limit) judgeDefect(d *pipeline.Defect, whole bool) []pipeline.Reason {
	values := l.record.Of(d)
	subject := func() string {
		return fmt.Sprintf("%s %d at (%.1f, %.1f) px of view %s", d.Kind, d.ID, d.XPx, d.YPx, d.View)
	}
	if l.bounded() {
		value, err := l.rule.Number(values)
		if err != nil {
			return []pipeline.Reason{l.unjudged(d.ID, err.Error())}
		}
		return l.bounds(value, d.ID, subject, whole)
	}
	return l.condition(values, d.ID, subject, true)
}

func (l *limit) judgeList(e pipeline.Evidence, defects []pipeline.Defect, whole bool) []pipeline.Reason {
	values := rules.Map{"defects": l.record.List(defects), "coverage": e.Coverage}
	if area := l.area(e); area > 0 {
		values["zone_area_mm2"] = area
	}
	subject := func() string { return fmt.Sprintf("%d %s", len(defects), l.group()) }
	if l.Broken != "" {
		return l.condition(values, 0, subject, whole)
	}
	value, err := l.rule.Number(values)
	if err != nil {
		return []pipeline.Reason{l.unjudged(0, err.Error())}
	}
	return l.bounds(value, 0, subject, whole)
}

func (l *limit) group() string {
	name := "defects"
	if l.Kind != "" {
		name += " of kind " + l.Kind
	}
	if l.Zone != "" {
		name += " in zone " + l.Zone
	}
	return name
}

// area returns the area of the limit's zone, or of all zones, in the first view with a
// region; 0 where that is not known, and then a rule that needs it cannot be judged.
func (l *limit) area(e pipeline.Evidence) float64 {
	for _, v := range e.Views {
		total := 0.0
		for _, z := range v.Region.Zones {
			if l.Zone == "" || l.Zone == z.Name {
				total += z.AreaMM2
			}
		}
		if total > 0 {
			return total
		}
	}
	return 0
}
