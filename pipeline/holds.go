package pipeline

import "fmt"

// Names of the reasons for which a unit is held whatever its limits say.
const (
	ReasonMissingView = "missing view"
	ReasonStageFailed = "stage failed"
	ReasonLate        = "late"
	ReasonTruncated   = "truncated"
	ReasonSaturated   = "saturated"
	ReasonBadFrame    = "bad frame"
	ReasonConflict    = "identity conflict"
	ReasonUnproven    = "not proven"
	ReasonNoRecipe    = "no recipe"
	ReasonCoverage    = "coverage"
	ReasonAttempts    = "too many attempts"
	ReasonOverdue     = "master overdue"
	ReasonMaster      = "master failed"
	ReasonMasterUnit  = "master shown as a unit"
	ReasonDirt        = "dirt or hot pixel"
)

// HoldReasons returns why evidence cannot be accepted whatever its limits say:
// failures, proofs that failed, truncation, saturation. A Judge calls it first; the
// engine calls it again and never lets an accept past it.
func HoldReasons(e Evidence) []Reason {
	var out []Reason
	for _, f := range e.Failures {
		out = append(out, failureReason(f))
	}
	if len(e.Views) == 0 && len(e.Failures) == 0 {
		out = append(out, Reason{Name: ReasonMissingView, Verdict: Hold, Text: "no view was inspected"})
	}
	for _, v := range e.Views {
		out = append(out, proofReasons(v)...)
	}
	if e.Truncated {
		out = append(out, Reason{Name: ReasonTruncated, Verdict: Hold,
			Text: fmt.Sprintf("more than %d defects; the list was cut", MaxDefects), Limit: MaxDefects})
	}
	if e.Saturated {
		out = append(out, Reason{Name: ReasonSaturated, Verdict: Hold,
			Text: "saturated pixels in the region beyond single defects; lower the exposure or the lamp"})
	}
	return out
}

func failureReason(f Failure) Reason {
	text := f.Detail
	if f.Stage != "" {
		text = fmt.Sprintf("stage %s: %s", f.Stage, text)
	}
	if f.View != "" {
		text = fmt.Sprintf("view %s: %s", f.View, text)
	}
	return Reason{Name: f.Reason, Verdict: Hold, Text: text}
}

func proofReasons(v ViewEvidence) []Reason {
	var out []Reason
	for _, p := range v.Proofs {
		if p.OK {
			continue
		}
		name := ReasonUnproven + ": " + p.Name
		out = append(out, Reason{Name: name, Verdict: Hold, Text: fmt.Sprintf("view %s: %s", v.Name, p.Reason),
			Value: p.Value, Limit: nearest(p), Over: p.Value - nearest(p), Unit: p.Unit})
	}
	return out
}

// nearest returns the bound that the value is on the wrong side of.
func nearest(p Proof) float64 {
	if p.Value < p.Low {
		return p.Low
	}
	return p.High
}
