package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
)

// opticsWarning is a limit that the optics do not serve, with the file it stands in.
type opticsWarning struct {
	File  string `json:"file"`
	Limit string `json:"limit"`
	Text  string `json:"text"`
}

// opticsWarnings looks at one recipe, or at every recipe of a folder; those with problems
// are told elsewhere.
func opticsWarnings(path string, cat *pipeline.Catalogue, cals map[string]*pipeline.Calibration) []opticsWarning {
	var out []opticsWarning
	for _, f := range recipesAt(path) {
		r, err := configs.LoadRecipe(f, cat)
		if err != nil {
			continue
		}
		for _, w := range configs.CheckOptics(r, cals) {
			out = append(out, opticsWarning{File: f, Limit: w.Name, Text: w.Text})
		}
	}
	return out
}

// uncheckedIn is unchecked for one recipe, or for every recipe of a folder.
func (s *stageSet) uncheckedIn(path string) []string {
	var out []string
	for _, f := range recipesAt(path) {
		if r, err := configs.LoadRecipe(f, s.current()); err == nil {
			out = append(out, s.unchecked(r)...)
		}
	}
	return out
}

// recipesAt returns a file, or those of a folder.
func recipesAt(path string) []string {
	if info, err := os.Stat(path); err != nil || !info.IsDir() {
		return []string{path}
	}
	files, _ := filepath.Glob(filepath.Join(path, "*.y*ml")) // the pattern is well formed
	return files
}

// loadCalibrations reads VIEW=DIR flags.
func loadCalibrations(flags []string) (map[string]*pipeline.Calibration, error) {
	cals := map[string]*pipeline.Calibration{}
	for _, c := range flags {
		view, dir, ok := strings.Cut(c, "=")
		if !ok {
			return nil, usageError{fmt.Errorf("--calibration: got %q, want VIEW=DIR", c)}
		}
		var err error
		if cals[view], err = calibrate.Load(dir); err != nil {
			return nil, usageError{fmt.Errorf("calibration of view %s: %w", view, err)}
		}
	}
	return cals, nil
}
