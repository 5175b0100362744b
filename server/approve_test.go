package server_test

import (
	"context"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// looser lets a dig of 80 µm pass, which recipeText does not.
var looser = strings.Replace(recipeText, "at_most: 60", "at_most: 100", 1)

func inLot(lot string) func(*pipeline.FrameHeader) {
	return func(h *pipeline.FrameHeader) { h.Lot = lot }
}

func (r *rig) approve(hash string, effective inspectpb.Effective) error {
	_, err := r.recipes.ApproveRecipe(context.Background(), &inspectpb.ApproveRecipeRequest{Approval: &inspectpb.Approval{
		Hash: hash, Author: "Q. Engineer", Approver: "A. Pprover", Reason: "limits of drawing B", Effective: effective}})
	return err
}

func newApproved(t *testing.T, o rigOptions) *rig {
	o.approval, o.clock = true, &clock{at: time.Now().UTC().Truncate(time.Hour)}
	return newRig(t, o)
}

func (r *rig) list() *inspectpb.ListRecipesResponse {
	r.t.Helper()
	list, err := r.recipes.ListRecipes(context.Background(), &inspectpb.ListRecipesRequest{})
	must(r.t, err)
	return list
}

// Nothing is judged by a recipe that nobody approved, and the refusal says what to run.
func TestUnapprovedRecipeRefusesUnits(t *testing.T) {
	r := newApproved(t, rigOptions{})
	hash := r.save(recipeText)
	if _, text := r.show("u1", 1, pipeline.Production, 0); !strings.Contains(text, "waits for approval") || !strings.Contains(text, "lapgate approve "+hash+" --author") {
		t.Errorf("refusal %q, want one that says which command to run", text)
	}
	if l := r.list(); len(l.Recipes) != 0 || len(l.Waiting) != 1 || l.Waiting[0].Hash != hash || l.Development {
		t.Errorf("recipes %v, want one waiting", l)
	}
	must(t, r.approve(hash, inspectpb.Effective_EFFECTIVE_NOW))
	r.want(accept, "")(r.show("u1", 1, pipeline.Production, 0))
	if l := r.list(); len(l.Recipes) != 1 || len(l.Waiting) != 0 || l.Recipes[0].Approval.GetApprover() != "A. Pprover" {
		t.Errorf("recipes %v, want one in force by A. Pprover", l)
	}
}

// A saved change judges once it is approved; until then, and over a restart, the last
// approved one does.
func TestTheLastApprovedRecipeStaysInForce(t *testing.T) {
	r := newApproved(t, rigOptions{})
	first := r.save(recipeText)
	must(t, r.approve(first, inspectpb.Effective_EFFECTIVE_NOW))
	r.want(reject, "dig too large")(r.show("u1", 1, pipeline.Production, 8))
	second := r.save(looser)
	r.want(reject, "dig too large")(r.show("u2", 1, pipeline.Production, 8))
	if l := r.list(); len(l.Recipes) != 1 || l.Recipes[0].Hash != first || len(l.Waiting) != 1 || l.Waiting[0].Hash != second {
		t.Errorf("recipes %v, want the first in force and the second waiting", l)
	}
	again := newRig(t, rigOptions{approval: true, clock: r.clock, recipe: looser, dsn: r.dsn}) // the folder has only the second
	again.want(reject, "dig too large")(again.show("u3", 1, pipeline.Production, 8))
	must(t, again.approve(second, inspectpb.Effective_EFFECTIVE_NOW))
	again.want(accept, "")(again.show("u4", 1, pipeline.Production, 8))
	must(t, r.book.Refresh(context.Background())) // the other server looks now and then
	r.want(accept, "")(r.show("u5", 1, pipeline.Production, 8))
	must(t, r.approve(first, inspectpb.Effective_EFFECTIVE_NOW)) // back again
	r.want(reject, "dig too large")(r.show("u6", 1, pipeline.Production, 8))
}

// Effective with the next lot: the lots under way keep the old recipe to their end, on
// the line and station where they are under way.
func TestNextLotGetsTheNewRecipe(t *testing.T) {
	r := newApproved(t, rigOptions{})
	must(t, r.approve(r.save(recipeText), inspectpb.Effective_EFFECTIVE_NOW))
	r.want(reject, "dig too large")(r.show("u1", 1, pipeline.Production, 8, inLot("L1")))
	r.want(reject, "dig too large")(r.show("u2", 1, pipeline.Production, 8, inLot("")))
	must(t, r.approve(r.save(looser), inspectpb.Effective_EFFECTIVE_NEXT_LOT))
	for i, want := range []struct {
		lot, line string
		verdict   inspectpb.Verdict
	}{{"L1", "A", reject}, {"L2", "A", accept}, {"L1", "A", reject}, {"", "A", reject}, {"L1", "B", accept}, {"L2", "A", accept}} {
		got, reasons := r.show("v"+string(rune('1'+i)), 1, pipeline.Production, 8, inLot(want.lot), func(h *pipeline.FrameHeader) { h.Line = want.line })
		if got != want.verdict {
			t.Errorf("lot %q on line %s: %v because of %q, want %v", want.lot, want.line, got, reasons, want.verdict)
		}
	}
	if l := r.list(); len(l.Recipes) != 2 || len(l.Waiting) != 0 {
		t.Errorf("recipes %v, want both in force", l)
	}
	again := newRig(t, rigOptions{approval: true, clock: r.clock, recipe: looser, dsn: r.dsn}) // the ledger remembers the lots
	again.want(reject, "dig too large")(again.show("w1", 1, pipeline.Production, 8, inLot("L1")))
	again.want(accept, "")(again.show("w2", 1, pipeline.Production, 8, inLot("L2")))
}

func TestWhoMayApprove(t *testing.T) {
	r := newApproved(t, rigOptions{people: []configs.Person{{Name: "Q. Engineer", Roles: []string{"engineer"}}, {Name: "A. Pprover", Roles: []string{"approver"}},
		{Name: "O. Perator", Roles: []string{"operator"}}}})
	hash := r.save(recipeText)
	for name, c := range map[string]struct {
		author, person, hash string
		code                 codes.Code
		is                   string
	}{
		"same person":  {"A. Pprover", "a. pprover", hash, codes.InvalidArgument, "second person"},
		"not approver": {"Q. Engineer", "O. Perator", hash, codes.InvalidArgument, "person: O. Perator is listed as operator, want a person who is approver"},
		"not engineer": {"O. Perator", "A. Pprover", hash, codes.InvalidArgument, "author: O. Perator is listed as operator"},
		"stranger":     {"Q. Engineer", "N. Obody", hash, codes.InvalidArgument, `person: "N. Obody" is not in the server's list`},
		"no such hash": {"Q. Engineer", "A. Pprover", "sha256:00", codes.NotFound, "save it in the recipes folder"},
	} {
		_, err := r.recipes.ApproveRecipe(context.Background(), &inspectpb.ApproveRecipeRequest{Approval: &inspectpb.Approval{
			Hash: c.hash, Author: c.author, Approver: c.person, Reason: "x", Effective: inspectpb.Effective_EFFECTIVE_NOW}})
		if status.Code(err) != c.code || !strings.Contains(err.Error(), c.is) {
			t.Errorf("%s: %v, want %v with %q", name, err, c.code, c.is)
		}
	}
	if err := r.approve(hash, inspectpb.Effective_EFFECTIVE_UNSPECIFIED); status.Code(err) != codes.InvalidArgument {
		t.Errorf("effective never: %v, want InvalidArgument", err)
	}
	must(t, r.approve(hash, inspectpb.Effective_EFFECTIVE_NOW))
	must(t, r.approve(hash, inspectpb.Effective_EFFECTIVE_NOW)) // sent twice
	list, err := r.recipes.ListApprovals(context.Background(), &inspectpb.ListApprovalsRequest{Part: "disc"})
	must(t, err)
	if len(list.Approvals) != 1 || list.Approvals[0].Approval.Author != "Q. Engineer" || list.Approvals[0].File != "disc.yaml" || list.Approvals[0].Approval.At == nil {
		t.Errorf("approvals %v, want one", list.Approvals)
	}
}
