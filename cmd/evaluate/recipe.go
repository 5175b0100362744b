package main

import (
	"io/fs"
	"os"
	"path/filepath"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/builtin"
)

// loadRecipe reads testdata/evaluate/NAME.yaml.
func loadRecipe(o options, name string) (*pipeline.Recipe, *pipeline.Catalogue, error) {
	cat, err := builtin.Catalogue()
	if err != nil {
		return nil, nil, err
	}
	r, err := configs.LoadRecipe(filepath.Join(o.testdata, "evaluate", name+".yaml"), cat)
	return r, cat, err
}

// build makes a recipe ready to run.
func build(r *pipeline.Recipe, cat *pipeline.Catalogue, cals map[string]*pipeline.Calibration, unfused bool) (*pipeline.Pipeline, error) {
	dir := os.DirFS(filepath.Dir(r.File))
	read := func(name string) ([]byte, error) { return fs.ReadFile(dir, name) }
	return pipeline.Build(r, cat, pipeline.Options{Calibrations: cals, ReadFile: read, ProgramVersion: "evaluate", Unfused: unfused})
}

// identity is that of a unit shown for evaluation.
func identity(r *pipeline.Recipe, unit string) pipeline.Identity {
	return pipeline.Identity{Part: r.Part, Revision: r.Revision, Surface: r.Surface, Unit: unit,
		Line: "desk", Station: "desk", Attempt: 1, Purpose: pipeline.Study}
}
