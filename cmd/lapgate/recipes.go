package main

import (
	"context"
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
)

func recipesCommand() *cobra.Command {
	var hash string
	var asJSON bool
	c := &cobra.Command{
		Use:   "recipes",
		Short: "List the recipes in force and the files that could not be loaded, or print one by its hash",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&hash, "hash", "", "print the text of this recipe, which was ever in force")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON document")
	c.RunE = func(c *cobra.Command, _ []string) error {
		if hash != "" {
			return printRecipe(c, *server, hash, asJSON)
		}
		var r *inspectpb.ListRecipesResponse
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
			r, err = inspectpb.NewRecipeServiceClient(conn).ListRecipes(ctx, &inspectpb.ListRecipesRequest{})
			return err
		})
		if err != nil {
			return err
		}
		if err := recipesDisplay(r).write(c.OutOrStdout(), asJSON, false); err != nil || asJSON {
			return err
		}
		for _, p := range r.GetProblems() {
			fmt.Fprintf(c.OutOrStdout(), "not loaded: %s:%d:%d: %s\n", p.GetFile(), p.GetLine(), p.GetColumn(), p.GetMessage())
		}
		for _, p := range r.GetWaiting() {
			fmt.Fprintf(c.OutOrStdout(), "waiting for approval: %s, saved %s; lapgate approve %s --author NAME --person NAME --reason TEXT --effective now\n",
				p.GetFile(), whenOf(p.GetSince().AsTime()), p.GetHash())
		}
		if r.GetDevelopment() {
			fmt.Fprintln(c.OutOrStdout(), "the server runs for development: recipes judge without approval")
		}
		return nil
	}
	return c
}

func printRecipe(c *cobra.Command, server, hash string, asJSON bool) error {
	var r *inspectpb.GetRecipeResponse
	err := ask(c.Context(), server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
		r, err = inspectpb.NewRecipeServiceClient(conn).GetRecipe(ctx, &inspectpb.GetRecipeRequest{Hash: hash})
		return err
	})
	if err != nil {
		return err
	}
	if asJSON {
		return writeJSON(c.OutOrStdout(), map[string]string{"hash": r.GetHash(), "text": r.GetText()})
	}
	_, err = fmt.Fprint(c.OutOrStdout(), r.GetText())
	return err
}

type recipeOf struct {
	Part     string      `json:"part"`
	Revision string      `json:"revision"`
	Surface  string      `json:"surface"`
	Hash     string      `json:"hash"`
	Places   []placeOf   `json:"places"` // where units were judged by it
	File     string      `json:"file"`
	Views    []string    `json:"views"`
	Since    time.Time   `json:"since"`
	Refused  string      `json:"refused"`  // why a later save of the file is not in force
	Approval *approvalOf `json:"approval"` // null = none is needed
}

// waitingOf is a recipe that was saved and not approved.
type waitingOf struct {
	Part     string    `json:"part"`
	Revision string    `json:"revision"`
	Surface  string    `json:"surface"`
	Hash     string    `json:"hash"`
	File     string    `json:"file"`
	Since    time.Time `json:"since"`
}

func waitingList(list []*inspectpb.RecipeWaiting) []waitingOf {
	out := []waitingOf{}
	for _, p := range list {
		out = append(out, waitingOf{p.GetPart(), p.GetRevision(), p.GetSurface(), p.GetHash(), p.GetFile(), p.GetSince().AsTime()})
	}
	return out
}

// approver is who let a recipe judge, "-" where nobody had to.
func (r recipeOf) approver() string {
	if r.Approval == nil {
		return "-"
	}
	return r.Approval.Approver
}

// placeOf is a station with the hashes that its calibration gave.
type placeOf struct {
	Line          string `json:"line"`
	Station       string `json:"station"`
	DetectionHash string `json:"detection_hash"`
	JudgingHash   string `json:"judging_hash"`
}

type problemOf struct {
	File    string `json:"file"`
	Line    int32  `json:"line"`
	Column  int32  `json:"column"`
	Message string `json:"message"`
}

func recipesDisplay(r *inspectpb.ListRecipesResponse) display {
	recipes, problems := []recipeOf{}, []problemOf{}
	d := display{}
	for _, p := range r.GetRecipes() {
		places := []placeOf{}
		for _, at := range p.GetPlaces() {
			places = append(places, placeOf{at.GetLine(), at.GetStation(), at.GetDetectionHash(), at.GetJudgingHash()})
		}
		one := recipeOf{p.GetPart(), p.GetRevision(), p.GetSurface(), p.GetHash(), places, p.GetFile(),
			orEmpty(p.GetViews()), p.GetSince().AsTime(), p.GetRefused(), nil}
		if p.GetApproval() != nil {
			if a, err := newApproval(p.GetApproval()); err == nil {
				one.Approval = &a
			}
		}
		recipes = append(recipes, one)
		d.forEye = append(d.forEye, []string{one.Part, one.Revision, one.Surface, strings.Join(one.Views, " "), whenOf(one.Since), one.approver(), one.File, one.Hash, one.Refused})
	}
	for _, p := range r.GetProblems() {
		problems = append(problems, problemOf{p.GetFile(), p.GetLine(), p.GetColumn(), p.GetMessage()})
	}
	d.document = map[string]any{"recipes": recipes, "problems": problems, "waiting": waitingList(r.GetWaiting()), "development": r.GetDevelopment()}
	return d.withEyeHead([]string{"part", "revision", "surface", "views", "in force since", "approved by", "file", "hash", "refused save"})
}
