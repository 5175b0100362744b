package inspectpb

import (
	"maps"

	"lapgate/pipeline"
)

// FromReason encodes a reason.
func FromReason(r pipeline.Reason) *Reason {
	return &Reason{
		Name: r.Name, Verdict: FromVerdict(r.Verdict), Text: r.Text, Zone: r.Zone, DefectId: clamp32(r.DefectID),
		Value: r.Value, Limit: r.Limit, Over: r.Over, Unit: r.Unit, Rule: r.Rule,
	}
}

// ToReason decodes a reason; it refuses an unknown verdict.
func ToReason(r *Reason) (pipeline.Reason, error) {
	verdict, err := ToVerdict(r.GetVerdict())
	return pipeline.Reason{
		Name: r.GetName(), Verdict: verdict, Text: r.GetText(), Zone: r.GetZone(), DefectID: int(r.GetDefectId()),
		Value: r.GetValue(), Limit: r.GetLimit(), Over: r.GetOver(), Unit: r.GetUnit(), Rule: r.GetRule(),
	}, err
}

// FromJudgement encodes a judgement.
func FromJudgement(j pipeline.Judgement) *Judgement {
	return &Judgement{
		Verdict: FromVerdict(j.Verdict), Reasons: each(j.Reasons, FromReason), By: j.By, Person: j.Person, Recipe: j.Recipe,
		DetectionHash: j.DetectionHash, JudgingHash: j.JudgingHash, ProgramVersion: j.ProgramVersion,
		StageVersions: maps.Clone(j.StageVersions), At: FromTime(j.At),
	}
}

// ToJudgement decodes a judgement; it refuses a missing one and unknown verdicts.
func ToJudgement(j *Judgement) (pipeline.Judgement, error) {
	if j == nil {
		return pipeline.Judgement{}, pipeline.Invalid("judgement: not given, want a verdict with its reasons")
	}
	verdict, err := ToVerdict(j.Verdict)
	if err != nil {
		return pipeline.Judgement{}, err
	}
	reasons, err := tryEach("reasons", j.Reasons, ToReason)
	if err != nil {
		return pipeline.Judgement{}, err
	}
	at, err := ToTime("at", j.At)
	return pipeline.Judgement{
		Verdict: verdict, Reasons: reasons, By: j.By, Person: j.Person, Recipe: j.Recipe,
		DetectionHash: j.DetectionHash, JudgingHash: j.JudgingHash, ProgramVersion: j.ProgramVersion,
		StageVersions: maps.Clone(j.StageVersions), At: at,
	}, err
}

// FromFailure encodes a failure.
func FromFailure(f pipeline.Failure) *Failure {
	return &Failure{Reason: f.Reason, View: f.View, Stage: f.Stage, Detail: f.Detail}
}

// ToFailure decodes a failure.
func ToFailure(f *Failure) pipeline.Failure {
	return pipeline.Failure{Reason: f.GetReason(), View: f.GetView(), Stage: f.GetStage(), Detail: f.GetDetail()}
}

// FromFailures encodes a list.
func FromFailures(f []pipeline.Failure) []*Failure { return each(f, FromFailure) }

// ToFailures decodes a list.
func ToFailures(f []*Failure) []pipeline.Failure { return each(f, ToFailure) }
