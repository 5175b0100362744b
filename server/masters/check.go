package masters

import (
	"fmt"
	"slices"
	"strings"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Spec returns the master that a showing is of; ok is false where the recipe names none.
func Spec(r *pipeline.Recipe, id pipeline.Identity) (m pipeline.MasterSpec, ok bool) {
	if id.Purpose != pipeline.Master {
		return m, false
	}
	return named(r, id.Unit)
}

// named returns the master of a recipe that has this unit id.
func named(r *pipeline.Recipe, unit string) (m pipeline.MasterSpec, ok bool) {
	i := slices.IndexFunc(r.Masters, func(m pipeline.MasterSpec) bool { return m.Unit == unit })
	if i < 0 {
		return m, false
	}
	return r.Masters[i], true
}

// Compare holds a judged showing of a master against what is expected of it.
func Compare(m pipeline.MasterSpec, e pipeline.Evidence, j pipeline.Judgement, conditions map[string]string) ledger.MasterCheck {
	c := ledger.MasterCheck{View: m.View, Kind: m.Kind, Expected: m.Expect, Measure: m.Measure, Low: m.Low, High: m.High, Conditions: conditions}
	if d, ok := find(m, e); ok {
		v, _ := d.Measured(m.Measure)
		c.Value = &v
	}
	c.Result, c.Why = outcome(m, c.Value, e, j)
	return c
}

// undelivered are the failures that say nothing about lamp, lens and stages: the frames
// did not come, or not in time.
func undelivered() []string {
	return []string{pipeline.ReasonLate, pipeline.ReasonMissingView, pipeline.ReasonBadFrame}
}

func outcome(m pipeline.MasterSpec, value *float64, e pipeline.Evidence, j pipeline.Judgement) (ledger.CheckResult, string) {
	for _, f := range e.Failures {
		if slices.Contains(undelivered(), f.Reason) {
			return ledger.CheckVoid, fmt.Sprintf("%s: %s; it proves nothing, show the master again", f.Reason, f.Detail)
		}
	}
	switch {
	case j.Verdict != m.Expect:
		return ledger.CheckFail, fmt.Sprintf("the verdict is %s, expected was %s%s", j.Verdict, m.Expect, because(j))
	case m.Expect == pipeline.Accept:
		return ledger.CheckPass, "accepted as expected"
	case value == nil:
		return ledger.CheckFail, fmt.Sprintf("view %s found no %s", m.View, m.Kind)
	case m.Low != nil && *value < *m.Low:
		return ledger.CheckFail, fmt.Sprintf("%s of its %s in view %s is %.4g, want at least %g", m.Measure, m.Kind, m.View, *value, *m.Low)
	case m.High != nil && *value > *m.High:
		return ledger.CheckFail, fmt.Sprintf("%s of its %s in view %s is %.4g, want at most %g", m.Measure, m.Kind, m.View, *value, *m.High)
	}
	return ledger.CheckPass, fmt.Sprintf("rejected as expected; view %s found the %s", m.View, m.Kind)
}

func because(j pipeline.Judgement) string {
	var names []string
	for _, r := range j.Reasons {
		if !slices.Contains(names, r.Name) {
			names = append(names, r.Name)
		}
	}
	if len(names) == 0 {
		return ""
	}
	return " (" + strings.Join(names, ", ") + ")"
}

// find returns the defect of the master's kind that its view saw, by that view's own
// measures; where there are several, the one of which there is most.
func find(m pipeline.MasterSpec, e pipeline.Evidence) (best pipeline.Defect, ok bool) {
	for _, d := range e.Defects {
		if d.Kind != m.Kind {
			continue
		}
		seen, is := inView(d, m.View, e)
		if !is {
			continue
		}
		value, _ := seen.Measured(m.Measure)
		if most, _ := best.Measured(m.Measure); !ok || value > most {
			best, ok = seen, true
		}
	}
	return best, ok
}

// inView returns a unit's defect as one view measured it.
func inView(d pipeline.Defect, view string, e pipeline.Evidence) (pipeline.Defect, bool) {
	for _, ref := range d.MergedFrom {
		for _, v := range e.Views {
			if v.Name != view || ref.View != view {
				continue
			}
			for _, own := range v.Defects {
				if own.ID == ref.ID {
					return own, true
				}
			}
		}
	}
	return d, d.View == view || slices.Contains(d.SeenIn, view)
}
