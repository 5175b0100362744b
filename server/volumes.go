package server

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"math"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
	"lapgate/server/volume"
	"lapgate/server/volume/plan"
)

// Volume implements inspectpb.VolumeServiceServer.
type Volume struct {
	inspectpb.UnimplementedVolumeServiceServer
	deps Deps
}

// planFile is what the plan is called in messages.
const planFile = "plan"

// EvaluatePlan implements VolumeService.
func (s *Volume) EvaluatePlan(ctx context.Context, req *inspectpb.EvaluatePlanRequest) (*inspectpb.EvaluatePlanResponse, error) {
	p, err := s.plan(ctx, req)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	result, err := volume.Evaluate(ctx, p, req.Quantities, nil)
	if err != nil {
		return nil, inspectpb.ToStatus(pipeline.Invalid("plan: %w", err))
	}
	return planResponse(result)
}

// plan reads the plan and what it names; mistakes carry line and column.
func (s *Volume) plan(ctx context.Context, req *inspectpb.EvaluatePlanRequest) (*plan.Plan, error) {
	p, src, err := configs.Decode(planFile, []byte(req.Plan), plan.Plan{})
	if err != nil {
		return nil, pipeline.Invalid("%w", err)
	}
	p.Format = plan.Format // configs refuses any other
	if err := p.Validate(); err != nil {
		return nil, placed(src, err)
	}
	text := func(name string) ([]byte, error) {
		t, ok := req.Files[name]
		if !ok {
			return nil, pipeline.Invalid("files: the plan names %q, which was not sent", name)
		}
		return []byte(t), nil
	}
	var failed error // of the ledger: a failure, not a mistake
	err = errors.Join(
		p.ResolveStudies(func(name string) (*plan.Study, error) { return studyOf(name, text) }),
		p.ResolveThreshold(func(name string) ([]plan.ThresholdRow, error) {
			t, err := text(name)
			if err != nil {
				return nil, err
			}
			return plan.ReadThresholds(bytes.NewReader(t))
		}),
		p.ResolveLedger(func(f plan.LedgerFilter) (plan.Counts, error) {
			c, err := s.counts(ctx, f)
			failed = errors.Join(failed, err)
			return c, err
		}))
	if failed != nil {
		return nil, failed
	}
	if err != nil {
		return nil, placed(src, err)
	}
	return &p, nil
}

func studyOf(name string, text func(string) ([]byte, error)) (*plan.Study, error) {
	t, err := text(name)
	if err != nil {
		return nil, err
	}
	study, src, err := configs.Decode(name, t, plan.Study{})
	if err != nil {
		return nil, err
	}
	study.Format = plan.Format
	if err := study.Validate(); err != nil {
		return nil, placed(src, err)
	}
	return &study, nil
}

// placed gives problems of a plan their line and column.
func placed(src configs.Source, err error) error {
	var all configs.Problems
	for _, problem := range plan.Problems(err) {
		all = append(all, src.Problem(problem.Path, problem.Message, ""))
	}
	if all == nil {
		return pipeline.Invalid("%w", err)
	}
	return pipeline.Invalid("%w", all)
}

// counts asks the ledger for first verdicts; only production counts.
func (s *Volume) counts(ctx context.Context, f plan.LedgerFilter) (plan.Counts, error) {
	filter := &inspectpb.Filter{Part: f.Part, Process: f.Process, Lot: f.Lot, Line: f.Line, Station: f.Station, Recipe: f.Recipe}
	for text, field := range map[string]**timestamppb.Timestamp{f.From: &filter.From, f.To: &filter.To} {
		if text == "" {
			continue
		}
		at, err := time.Parse(time.RFC3339, text)
		if err != nil {
			return plan.Counts{}, pipeline.Invalid("ledger filter: %w", err)
		}
		*field = timestamppb.New(at)
	}
	q, err := filterOf(filter)
	if err != nil {
		return plan.Counts{}, err
	}
	rows, err := s.deps.Ledger.Counts(ctx, ledger.Question{Filter: q})
	if err != nil || len(rows) == 0 {
		return plan.Counts{}, err
	}
	first := rows[0].First
	return plan.Counts{Started: int(first.Total()), Accepted: int(first.Accept), Rejected: int(first.Reject), Held: int(first.Hold)}, nil
}

func planResponse(r *volume.Result) (*inspectpb.EvaluatePlanResponse, error) {
	whole, err := json.Marshal(r)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.EvaluatePlanResponse{Currency: r.Currency, Basis: r.Basis, Cautions: r.Cautions, ResultJson: string(whole)}
	for _, c := range r.Combinations {
		out.Combinations = append(out.Combinations, &inspectpb.PlanCombination{Process: c.Process, Inspection: c.Inspection})
	}
	for _, q := range r.Quantities {
		row := &inspectpb.PlanQuantity{GoodUnits: q.Good, Cheapest: int32(q.Best)}
		for _, c := range q.Cells {
			row.Cells = append(row.Cells, &inspectpb.PlanCell{Cost: amount(c.Cost), Low: amount(c.Low), High: amount(c.High),
				ChanceCheapest: c.ChanceBest, Starts: c.Starts, EscapesPerMillion: c.EscapesPerMillion})
		}
		out.Quantities = append(out.Quantities, row)
	}
	for _, c := range r.Crossovers {
		out.Crossovers = append(out.Crossovers, &inspectpb.PlanCrossover{First: int32(c.First), Second: int32(c.Second), GoodUnits: c.Quantity, WinnerTurns: c.WinnerTurn})
	}
	return out, nil
}

// amount is absent where it is unbounded.
func amount(m volume.Money) *float64 {
	v := float64(m)
	if math.IsInf(v, 0) || math.IsNaN(v) {
		return nil
	}
	return &v
}
