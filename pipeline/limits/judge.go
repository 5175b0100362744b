package limits

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"

	"lapgate/pipeline"
)

// Judge holds evidence against limits. It implements pipeline.Judge.
type Judge struct {
	specs       []Spec
	limits      []*limit
	minCoverage float64
}

var _ pipeline.Judge = (*Judge)(nil)

// New returns a Judge for specs, of which there must be one at least. minCoverage is the
// share (0 to 1) of the region that must have been inspected. Faulty specs give Mistakes.
func New(specs []Spec, minCoverage float64) (*Judge, error) {
	if len(specs) == 0 {
		return nil, pipeline.Invalid("limits: got none, want at least one: without a limit every unit would pass")
	}
	if !(minCoverage >= 0 && minCoverage <= 1) {
		return nil, pipeline.Invalid("min_coverage: got %v, want 0 to 1", minCoverage)
	}
	j := &Judge{specs: specs, minCoverage: minCoverage}
	record := Measures()
	var all Mistakes
	for i, s := range specs {
		l, mistakes := compile(s, record)
		if slices.ContainsFunc(specs[:i], func(o Spec) bool { return o.Name == s.Name }) {
			mistakes = append(mistakes, Mistake{Key: "name", Message: fmt.Sprintf("%q names an earlier limit too; every limit needs a name of its own", s.Name)})
		}
		for _, m := range mistakes {
			m.Limit = i
			all = append(all, m)
		}
		j.limits = append(j.limits, l)
	}
	if all != nil {
		return nil, all
	}
	return j, nil
}

// Judge implements pipeline.Judge: every broken limit by itself, then the verdict as the
// package's introduction states.
func (j *Judge) Judge(e pipeline.Evidence) (pipeline.Verdict, []pipeline.Reason) {
	reasons := append(pipeline.HoldReasons(e), j.coverage(e)...)
	whole := len(reasons) == 0
	for _, l := range j.limits {
		reasons = append(reasons, l.judge(e, whole)...)
	}
	switch {
	case len(reasons) == 0:
		return pipeline.Accept, nil
	case trustworthy(e) && slices.ContainsFunc(reasons, func(r pipeline.Reason) bool { return r.Verdict == pipeline.Reject }):
		return pipeline.Reject, reasons
	}
	return pipeline.Hold, reasons
}

// Canonical implements pipeline.Judge.
func (j *Judge) Canonical() []byte {
	b, err := json.Marshal(struct {
		Form        string
		Specs       []Spec
		MinCoverage float64
	}{"rules 1", j.specs, j.minCoverage})
	if err != nil {
		panic("limits: specs that cannot be written as JSON: " + err.Error())
	}
	return b
}

// coverage says why too little was inspected. A share that is no number is too little.
func (j *Judge) coverage(e pipeline.Evidence) []pipeline.Reason {
	if e.Coverage >= j.minCoverage {
		return nil
	}
	return []pipeline.Reason{{Name: pipeline.ReasonCoverage, Verdict: pipeline.Hold,
		Value: e.Coverage, Limit: j.minCoverage, Over: e.Coverage - j.minCoverage,
		Text: fmt.Sprintf("inspected %.4f of the region, want at least %.4f%s", e.Coverage, j.minCoverage, pipeline.CoverageCause(e))}}
}

// trustworthy reports whether what was found was found rightly: there is a view, every
// proof passed, and nothing failed but a view that is missing.
func trustworthy(e pipeline.Evidence) bool {
	if len(e.Views) == 0 {
		return false
	}
	for _, f := range e.Failures {
		if f.Reason != pipeline.ReasonMissingView {
			return false
		}
	}
	for _, v := range e.Views {
		if slices.ContainsFunc(v.Proofs, func(p pipeline.Proof) bool { return !p.OK }) {
			return false
		}
	}
	return true
}

// zoneNames lists the zones that the evidence knows.
func zoneNames(e pipeline.Evidence) []string {
	var out []string
	for _, v := range e.Views {
		for _, z := range v.Region.Zones {
			if !slices.Contains(out, z.Name) {
				out = append(out, z.Name)
			}
		}
	}
	return out
}

func listOrNone(names []string) string {
	if len(names) == 0 {
		return "none"
	}
	return strings.Join(names, ", ")
}
