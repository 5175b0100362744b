package main

import (
	"encoding/json"
	"io"

	"google.golang.org/grpc/codes"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// verdictLine is one line of the feed's output: a verdict, or why there is none, which
// is a hold.
type verdictLine struct {
	pipeline.Identity
	RequestID    string             `json:"request_id"`
	InspectionID string             `json:"inspection_id"`
	Verdict      pipeline.Verdict   `json:"verdict"`
	Reasons      []string           `json:"reasons"`
	Refused      string             `json:"refused,omitempty"` // why a frame was not taken
	Code         string             `json:"code,omitempty"`    // of the refusal
	Coverage     float64            `json:"coverage"`
	Defects      []pipeline.Defect  `json:"defects"`
	Failures     []pipeline.Failure `json:"failures"`
	Recipe       string             `json:"recipe"`
	Stored       bool               `json:"stored"`
	LatencyMS    float64            `json:"latency_ms"`
}

func lineOfVerdict(v *inspectpb.UnitVerdict) (verdictLine, error) {
	id, err := inspectpb.ToIdentity(v.GetIdentity())
	if err != nil {
		return verdictLine{}, err
	}
	j, err := inspectpb.ToJudgement(v.GetJudgement())
	if err != nil {
		return verdictLine{}, err
	}
	return verdictLine{
		Identity: id, RequestID: v.GetRequestId(), InspectionID: v.GetInspectionId(), Verdict: j.Verdict, Reasons: reasonNames(j),
		Coverage: v.GetCoverage(), Defects: orEmpty(inspectpb.ToDefects(v.GetDefects())), Failures: orEmpty(inspectpb.ToFailures(v.GetFailures())),
		Recipe: j.Recipe, Stored: v.GetStored(), LatencyMS: v.GetLatencyMs(),
	}, nil
}

// lineOfRefusal is the hold that follows from a frame that was not taken.
func lineOfRefusal(id pipeline.Identity, requestID string, code codes.Code, why string) verdictLine {
	reason := pipeline.ReasonBadFrame
	switch code {
	case codes.AlreadyExists:
		reason = pipeline.ReasonConflict
	case codes.FailedPrecondition:
		reason = pipeline.ReasonNoRecipe
	}
	return verdictLine{Identity: id, RequestID: requestID, Verdict: pipeline.Hold, Reasons: []string{reason},
		Refused: why, Code: code.String(), Defects: []pipeline.Defect{}, Failures: []pipeline.Failure{}}
}

// reasonNames lists each reason once, in the judgement's order.
func reasonNames(j pipeline.Judgement) []string {
	out := []string{}
	seen := map[string]bool{}
	for _, r := range j.Reasons {
		if !seen[r.Name] {
			seen[r.Name] = true
			out = append(out, r.Name)
		}
	}
	return out
}

func orEmpty[T any](list []T) []T {
	if list == nil {
		return []T{}
	}
	return list
}

// output writes the lines and hands those that are not accepted to the reject command.
type output struct {
	w      io.Writer
	reject *rejecter // nil = none
}

// write returns only when the line is written; ejects says whether the reject command
// is to run.
func (o output) write(l verdictLine, ejects bool) error {
	text, err := json.Marshal(l)
	if err != nil {
		return err
	}
	if _, err := o.w.Write(append(text, '\n')); err != nil {
		return err
	}
	if ejects && o.reject != nil && l.Verdict != pipeline.Accept {
		o.reject.add(l.Unit, text)
	}
	return nil
}
