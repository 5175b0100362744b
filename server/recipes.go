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
	out := &inspectpb.ListRecipesResponse{}
	files := s.deps.Book.snapshot()
	for _, file := range slices.Sorted(maps.Keys(files)) {
		e := files[file]
		if e.refused != nil {
			out.Problems = append(out.Problems, problems(file, e.refused)...)
		}
		if e.recipe == nil {
			continue
		}
		row := &inspectpb.RecipeInForce{Part: e.recipe.Part, Revision: e.recipe.Revision, Surface: e.recipe.Surface,
			Hash: e.recipe.TextHash, File: file, Since: inspectpb.FromTime(e.since)}
		for _, v := range e.recipe.Views {
			row.Views = append(row.Views, v.Name)
		}
		for where, p := range e.pipes {
			row.Places = append(row.Places, &inspectpb.RecipePlace{Line: where.line, Station: where.station,
				DetectionHash: p.pipe.DetectionHash, JudgingHash: p.pipe.JudgingHash})
		}
		if e.refused != nil {
			row.Refused = e.refused.Error()
		}
		out.Recipes = append(out.Recipes, row)
	}
	return out, nil
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
