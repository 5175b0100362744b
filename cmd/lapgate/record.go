package main

import (
	"time"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// inspectionOf is one inspection as the ledger has it.
type inspectionOf struct {
	InspectionID string `json:"inspection_id"`
	pipeline.Identity
	Digest       string               `json:"digest"`
	Captured     time.Time            `json:"captured"`
	Judged       time.Time            `json:"judged"`
	Late         bool                 `json:"late"`
	LatencyMS    float64              `json:"latency_ms"`
	Verdict      pipeline.Verdict     `json:"verdict"`
	Evidence     pipeline.Evidence    `json:"evidence"`
	Judgements   []pipeline.Judgement `json:"judgements"`
	Dispositions []dispositionOf      `json:"dispositions"`
	Outcomes     []outcomeOf          `json:"outcomes"`
	Suspicions   []suspicionOf        `json:"suspicions"` // masters that put it in doubt
	// Registration is how it lies to the showing before; null = there was none.
	Registration *registrationOf `json:"registration"`
}

type dispositionOf struct {
	Disposition string    `json:"disposition"`
	Person      string    `json:"person"`
	Reason      string    `json:"reason"`
	At          time.Time `json:"at"`
}

type outcomeOf struct {
	Bin       pipeline.Verdict `json:"bin"`
	Confirmed bool             `json:"confirmed"`
	At        time.Time        `json:"at"`
}

func newInspection(r *inspectpb.InspectionRecord) (inspectionOf, error) {
	out := inspectionOf{InspectionID: r.GetInspectionId(), Digest: r.GetDigest(), Late: r.GetLate(), LatencyMS: r.GetLatencyMs(),
		Captured: r.GetCaptured().AsTime(), Judged: r.GetJudged().AsTime(),
		Judgements: []pipeline.Judgement{}, Dispositions: []dispositionOf{}, Outcomes: []outcomeOf{},
		Suspicions: newSuspicions(r.GetSuspicions())}
	var err error
	if out.Identity, err = inspectpb.ToIdentity(r.GetIdentity()); err != nil {
		return out, err
	}
	if out.Verdict, err = inspectpb.ToVerdict(r.GetVerdict()); err != nil {
		return out, err
	}
	if out.Evidence, err = inspectpb.ToEvidence(r.GetEvidence()); err != nil {
		return out, err
	}
	if out.Registration, err = newRegistration(r.GetRegistration()); err != nil {
		return out, err
	}
	return out, out.addHistory(r)
}

// addHistory adds what was said about the inspection after it.
func (i *inspectionOf) addHistory(r *inspectpb.InspectionRecord) error {
	for _, j := range r.GetJudgements() {
		judgement, err := inspectpb.ToJudgement(j)
		if err != nil {
			return err
		}
		i.Judgements = append(i.Judgements, judgement)
	}
	for _, d := range r.GetDispositions() {
		word, err := inspectpb.ToDisposition(d.GetDisposition())
		if err != nil {
			return err
		}
		i.Dispositions = append(i.Dispositions, dispositionOf{word, d.GetPerson(), d.GetReason(), d.GetAt().AsTime()})
	}
	for _, o := range r.GetOutcomes() {
		bin, err := inspectpb.ToVerdict(o.GetBin())
		if err != nil {
			return err
		}
		i.Outcomes = append(i.Outcomes, outcomeOf{bin, o.GetConfirmed(), o.GetAt().AsTime()})
	}
	return nil
}

func newInspections(list []*inspectpb.InspectionRecord) ([]inspectionOf, error) {
	out := make([]inspectionOf, 0, len(list))
	for _, r := range list {
		i, err := newInspection(r)
		if err != nil {
			return nil, err
		}
		out = append(out, i)
	}
	return out, nil
}

// reasons lists the reasons of the line's judgement.
func (i inspectionOf) reasons() []string {
	if len(i.Judgements) == 0 {
		return nil
	}
	return reasonNames(i.Judgements[0])
}

// rowOf is an inspection without its evidence.
type rowOf struct {
	InspectionID string `json:"inspection_id"`
	pipeline.Identity
	Verdict   pipeline.Verdict `json:"verdict"`
	Reasons   []string         `json:"reasons"`
	Captured  time.Time        `json:"captured"`
	Judged    time.Time        `json:"judged"`
	Coverage  float64          `json:"coverage"`
	Defects   int32            `json:"defects"`
	Late      bool             `json:"late"`
	LatencyMS float64          `json:"latency_ms"`
	Recipe    string           `json:"recipe"`
	Missed    int32            `json:"missed,omitempty"` // inspections not shown before this one
	Alarms    []alarmOf        `json:"alarms,omitempty"` // that it raised or cleared
}

func newRow(r *inspectpb.UnitRow) (rowOf, error) {
	id, err := inspectpb.ToIdentity(r.GetIdentity())
	if err != nil {
		return rowOf{}, err
	}
	verdict, err := inspectpb.ToVerdict(r.GetVerdict())
	return rowOf{InspectionID: r.GetInspectionId(), Identity: id, Verdict: verdict, Reasons: orEmpty(r.GetReasons()),
		Captured: r.GetCaptured().AsTime(), Judged: r.GetJudged().AsTime(), Coverage: r.GetCoverage(), Defects: r.GetDefects(),
		Late: r.GetLate(), LatencyMS: r.GetLatencyMs(), Recipe: r.GetRecipe()}, err
}
