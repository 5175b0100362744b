package server

import (
	"context"
	"errors"
	"maps"
	"slices"
	"strings"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// ListRecipes implements RecipeService.
func (s *Recipes) ListRecipes(context.Context, *inspectpb.ListRecipesRequest) (*inspectpb.ListRecipesResponse, error) {
	out := &inspectpb.ListRecipesResponse{Development: s.deps.Book.Development()}
	files := s.deps.Book.snapshot()
	for _, file := range slices.Sorted(maps.Keys(files)) {
		e := files[file]
		if e.refused != nil {
			out.Problems = append(out.Problems, problems(file, e.refused)...)
		}
		for _, v := range e.byAge() {
			out.Recipes = append(out.Recipes, recipeRow(file, e, v))
		}
		if r := e.saved; r != nil && e.versions[r.TextHash] == nil {
			out.Waiting = append(out.Waiting, &inspectpb.RecipeWaiting{Part: r.Part, Revision: r.Revision, Surface: r.Surface, Hash: r.TextHash,
				File: file, Since: inspectpb.FromTime(e.since)})
		}
	}
	return out, nil
}

func recipeRow(file string, e entry, v *version) *inspectpb.RecipeInForce {
	row := &inspectpb.RecipeInForce{Part: v.recipe.Part, Revision: v.recipe.Revision, Surface: v.recipe.Surface,
		Hash: v.recipe.TextHash, File: file, Since: inspectpb.FromTime(v.since)}
	for _, view := range v.recipe.Views {
		row.Views = append(row.Views, view.Name)
	}
	for where, p := range v.pipes {
		row.Places = append(row.Places, &inspectpb.RecipePlace{Line: where.line, Station: where.station,
			DetectionHash: p.pipe.DetectionHash, JudgingHash: p.pipe.JudgingHash})
	}
	if e.refused != nil {
		row.Refused = e.refused.Error()
	}
	if v.approval != nil {
		row.Approval = approval(*v.approval)
	}
	return row
}

// GetRecipe implements RecipeService.
func (s *Recipes) GetRecipe(ctx context.Context, req *inspectpb.GetRecipeRequest) (*inspectpb.GetRecipeResponse, error) {
	r, err := s.deps.Ledger.Recipe(ctx, req.Hash)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.GetRecipeResponse{Hash: r.Hash, Text: r.Text}, nil
}

// ValidateRecipe implements RecipeService.
func (s *Recipes) ValidateRecipe(_ context.Context, req *inspectpb.ValidateRecipeRequest) (*inspectpb.ValidateRecipeResponse, error) {
	if strings.TrimSpace(req.Text) == "" {
		return nil, inspectpb.ToStatus(pipeline.Invalid("text: got none, want a recipe"))
	}
	err := s.deps.Check(req.File, []byte(req.Text))
	return &inspectpb.ValidateRecipeResponse{Problems: problems(req.File, err)}, nil
}

// problems lists the places that an error of the recipe reader speaks of; another error
// is one problem of the whole file.
func problems(file string, err error) []*inspectpb.Problem {
	if err == nil {
		return nil
	}
	var known configs.Problems
	if !errors.As(err, &known) {
		return []*inspectpb.Problem{{File: file, Message: err.Error()}}
	}
	var out []*inspectpb.Problem
	for _, p := range known {
		message := strings.TrimPrefix(p.Error(), p.Where()+": ")
		out = append(out, &inspectpb.Problem{File: p.File, Line: int32(p.Line), Column: int32(p.Column), Message: message})
	}
	return out
}
