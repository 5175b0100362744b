package server

import (
	"strconv"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// inspectionID reads an id as it stands on the wire.
func inspectionID(text string) (int64, error) {
	id, err := strconv.ParseInt(text, 10, 64)
	if err != nil {
		return 0, pipeline.Invalid("inspection_id: got %q, want the number that came with the verdict", text)
	}
	return id, nil
}

// record encodes a showing with all that became of it.
func record(sh ledger.Showing) *inspectpb.InspectionRecord {
	out := &inspectpb.InspectionRecord{
		InspectionId: strconv.FormatInt(sh.ID, 10), Identity: inspectpb.FromIdentity(sh.Identity), Digest: sh.Digest,
		Captured: inspectpb.FromTime(sh.Captured), Judged: inspectpb.FromTime(sh.Judged), Late: sh.Late, LatencyMs: sh.LatencyMS,
		Evidence: inspectpb.FromEvidence(sh.Evidence), Verdict: inspectpb.FromVerdict(sh.Judgement.Verdict),
	}
	for _, j := range sh.Judgements {
		out.Judgements = append(out.Judgements, inspectpb.FromJudgement(j))
	}
	if d := sh.Disposition; d != nil {
		out.Dispositions = []*inspectpb.DispositionRecord{disposition(*d)}
	}
	if r := sh.Registration; r != nil {
		out.Registration = registration(*r)
	}
	for _, s := range sh.Suspicions {
		out.Suspicions = append(out.Suspicions, &inspectpb.Suspicion{Master: s.Master, Cause: string(s.Cause), Why: s.Why, At: inspectpb.FromTime(s.At)})
	}
	for _, o := range sh.Outcomes {
		out.Outcomes = append(out.Outcomes, &inspectpb.OutcomeRecord{Bin: inspectpb.FromVerdict(o.Bin), Confirmed: o.Confirmed, At: inspectpb.FromTime(o.At)})
	}
	return out
}

func registration(r ledger.Registration) *inspectpb.Registration {
	out := &inspectpb.Registration{PreviousInspectionId: strconv.FormatInt(r.Against, 10), PreviousAttempt: int32(r.PreviousAttempt), Known: r.Known,
		RotationDeg: r.RotationDeg, ShiftUUm: r.ShiftUUM, ShiftVUm: r.ShiftVUM, RmsUm: r.RMSUM,
		PermanentVerdict: inspectpb.FromVerdict(r.Verdict), PermanentReasons: r.Reasons}
	for _, p := range r.Pairs {
		out.Pairs = append(out.Pairs, &inspectpb.DefectPair{Previous: int32(p.Previous), This: int32(p.This), DistanceUm: p.DistanceUM})
	}
	for _, id := range r.Removable {
		out.Removable = append(out.Removable, int32(id))
	}
	for _, id := range r.Arrived {
		out.Arrived = append(out.Arrived, int32(id))
	}
	return out
}

func disposition(d ledger.Disposition) *inspectpb.DispositionRecord {
	word, _ := inspectpb.FromDisposition(string(d.Decision)) // the ledger holds none that is unknown
	return &inspectpb.DispositionRecord{Disposition: word, Person: d.Person, Reason: d.Reason, At: inspectpb.FromTime(d.At)}
}

func records(list []ledger.Showing) []*inspectpb.InspectionRecord {
	var out []*inspectpb.InspectionRecord
	for _, sh := range list {
		out = append(out, record(sh))
	}
	return out
}

// unitRow encodes a showing without its evidence.
func unitRow(in ledger.Inspection) *inspectpb.UnitRow {
	row := &inspectpb.UnitRow{
		InspectionId: strconv.FormatInt(in.ID, 10), Identity: inspectpb.FromIdentity(in.Identity), Verdict: inspectpb.FromVerdict(in.Judgement.Verdict),
		Captured: inspectpb.FromTime(in.Captured), Judged: inspectpb.FromTime(in.Judged), Coverage: in.Evidence.Coverage,
		Defects: int32(len(in.Evidence.Defects)), Late: in.Late, LatencyMs: in.LatencyMS, Recipe: in.Judgement.Recipe,
	}
	for _, r := range in.Judgement.Reasons {
		row.Reasons = append(row.Reasons, r.Name)
	}
	return row
}
