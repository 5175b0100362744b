package server

import (
	"context"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// ReportOutcome implements InspectionService.
func (s *Inspection) ReportOutcome(ctx context.Context, req *inspectpb.ReportOutcomeRequest) (*inspectpb.ReportOutcomeResponse, error) {
	id, err := inspectpb.ToIdentity(req.Identity)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	bin, err := inspectpb.ToVerdict(req.Bin)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	at, err := inspectpb.ToTime("at", req.At)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	if err := s.deps.Ledger.Outcome(ctx, id, ledger.Outcome{Bin: bin, Confirmed: req.Confirmed, At: at}); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	in, err := s.deps.Ledger.Find(ctx, id)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	verdict := in.Judgement.Verdict
	return &inspectpb.ReportOutcomeResponse{Matches: bin == verdict || verdict == pipeline.Hold && bin == pipeline.Reject}, nil
}

// DisposeHold implements InspectionService.
func (s *Inspection) DisposeHold(ctx context.Context, req *inspectpb.DisposeHoldRequest) (*inspectpb.DisposeHoldResponse, error) {
	id, err := inspectionID(req.InspectionId)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	word, err := inspectpb.ToDisposition(req.Disposition)
	if err == nil {
		err = s.deps.People.mayAct(req.Person)
	}
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	if err := s.deps.Ledger.Dispose(ctx, id, ledger.Disposition{Decision: ledger.Decision(word), Person: req.Person, Reason: req.Reason}); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	in, err := s.deps.Ledger.Inspection(ctx, id)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	story, err := s.deps.Ledger.Unit(ctx, in.Part, in.Unit)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	for _, sh := range story {
		if sh.ID == id {
			return &inspectpb.DisposeHoldResponse{Inspection: record(sh)}, nil
		}
	}
	return nil, inspectpb.ToStatus(pipeline.NotFound("inspection %d: not on record", id))
}

// ListHolds implements InspectionService.
func (s *Inspection) ListHolds(ctx context.Context, req *inspectpb.ListHoldsRequest) (*inspectpb.ListHoldsResponse, error) {
	f := ledger.Filter{Part: req.Part, Line: req.Line, Lot: req.Lot, AnyPurpose: true}
	page, err := s.deps.Ledger.OpenHolds(ctx, f, ledger.Page{Limit: int(req.PageSize), After: req.PageToken})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.ListHoldsResponse{Holds: records(page.List), NextPageToken: page.Next}, nil
}

// GetUnit implements InspectionService.
func (s *Inspection) GetUnit(ctx context.Context, req *inspectpb.GetUnitRequest) (*inspectpb.GetUnitResponse, error) {
	if err := pipeline.CheckID("unit", req.Unit); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	if err := s.deps.Retest.CatchUp(ctx); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	story, err := s.deps.Ledger.Unit(ctx, req.Part, req.Unit)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.GetUnitResponse{Inspections: records(story)}, nil
}

// ListMismatches implements InspectionService.
func (s *Inspection) ListMismatches(ctx context.Context, req *inspectpb.ListMismatchesRequest) (*inspectpb.ListMismatchesResponse, error) {
	f := ledger.Filter{Part: req.Part, Line: req.Line, AnyPurpose: true}
	page, err := s.deps.Ledger.Mismatches(ctx, f, ledger.Page{Limit: int(req.PageSize), After: req.PageToken})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.ListMismatchesResponse{Inspections: records(page.List), NextPageToken: page.Next}, nil
}
