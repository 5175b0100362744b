package server

import (
	"context"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// ApproveRecipe implements RecipeService.
func (s *Recipes) ApproveRecipe(ctx context.Context, req *inspectpb.ApproveRecipeRequest) (*inspectpb.ApproveRecipeResponse, error) {
	effective, err := inspectpb.ToEffective(req.GetApproval().GetEffective())
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	w := req.Approval
	a := ledger.Approval{Hash: w.Hash, Author: w.Author, Approver: w.Approver, Reason: w.Reason, Effective: ledger.Effective(effective), At: s.deps.Now()}
	if err := s.deps.People.mayApprove(a); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	a, err = s.deps.Ledger.Approve(ctx, a)
	if err != nil {
		if pipeline.KindOf(err) == pipeline.NotFoundKind {
			err = pipeline.NotFound("%w: save it in the recipes folder first; `lapgate recipes` lists what waits", err)
		}
		return nil, inspectpb.ToStatus(err)
	}
	if err := s.deps.Book.Refresh(ctx); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	s.deps.Log.Info("recipe approved", "hash", a.Hash, "author", a.Author, "approver", a.Approver, "effective", effective)
	return &inspectpb.ApproveRecipeResponse{Approval: approval(a)}, nil
}

// ListApprovals implements RecipeService.
func (s *Recipes) ListApprovals(ctx context.Context, req *inspectpb.ListApprovalsRequest) (*inspectpb.ListApprovalsResponse, error) {
	list, err := s.deps.Ledger.Approvals(ctx, req.Part)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.ListApprovalsResponse{}
	for _, a := range list {
		out.Approvals = append(out.Approvals, &inspectpb.ApprovalRecord{Approval: approval(a.Approval),
			Part: a.Recipe.Part, Revision: a.Recipe.Revision, Surface: a.Recipe.Surface, File: a.Recipe.File})
	}
	return out, nil
}

func approval(a ledger.Approval) *inspectpb.Approval {
	return &inspectpb.Approval{Hash: a.Hash, Author: a.Author, Approver: a.Approver, Reason: a.Reason,
		Effective: inspectpb.FromEffective(string(a.Effective)), At: inspectpb.FromTime(a.At)}
}
