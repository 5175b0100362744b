package main

import (
	"context"
	"errors"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/outside"
)

func (a *app) validateCommand() *cobra.Command {
	var asJSON bool
	var plugins string
	var calibrations []string
	cmd := &cobra.Command{
		Use:   "validate FILE|FOLDER ...",
		Short: "Check recipes and say file:line:column, what was found and what is allowed",
		Args:  cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.validate(cmd.Context(), args, plugins, calibrations, asJSON)
		},
	}
	cmd.Flags().StringArrayVar(&calibrations, "calibration", nil, "VIEW=DIR, the calibration folder of a view, to hold limits against what it resolves; repeat")
	cmd.Flags().BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	pluginsFlag(cmd.Flags(), &plugins)
	return cmd
}

func (a *app) validate(ctx context.Context, paths []string, plugins string, calibrations []string, asJSON bool) error {
	set, err := openStages(ctx, plugins, a.silent(), outside.OpenLater, nil)
	if err != nil {
		return err
	}
	defer set.close()
	cals, err := loadCalibrations(calibrations)
	if err != nil {
		return err
	}
	var all []configs.Problem
	var warnings []opticsWarning
	unchecked := []string{}
	for _, p := range paths {
		problems, err := validatePath(p, set.current())
		if err != nil {
			return usageError{err}
		}
		all = append(all, problems...)
		warnings = append(warnings, opticsWarnings(p, set.current(), cals)...)
		unchecked = append(unchecked, set.uncheckedIn(p)...)
	}
	if asJSON {
		if err := printJSON(a.out, map[string]any{"problems": problemForms(all), "warnings": append([]opticsWarning{}, warnings...), "unchecked": unchecked}); err != nil {
			return err
		}
	} else {
		for _, p := range all {
			fmt.Fprintln(a.out, p.Error())
		}
		for _, w := range warnings {
			fmt.Fprintf(a.out, "%s: warning: limit %q: %s\n", w.File, w.Limit, w.Text)
		}
	}
	for _, text := range unchecked {
		fmt.Fprintln(a.err, text)
	}
	if len(all) > 0 {
		return usageError{fmt.Errorf("%d problems", len(all))}
	}
	if len(unchecked) > 0 {
		return fmt.Errorf("no problem found in what could be checked; not checked: the settings of stages in %d places", len(unchecked))
	}
	fmt.Fprintln(a.err, "no problem found")
	return nil
}

// validatePath checks a folder of configurations, or one recipe.
func validatePath(path string, cat *pipeline.Catalogue) ([]configs.Problem, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, err
	}
	if info.IsDir() {
		return configs.ValidateFolder(path, cat)
	}
	_, err = configs.LoadRecipe(path, cat)
	var problems configs.Problems
	if errors.As(err, &problems) {
		return problems, nil
	}
	return nil, err
}

func problemForms(list []configs.Problem) []map[string]any {
	out := []map[string]any{}
	for _, p := range list {
		out = append(out, map[string]any{"file": p.File, "line": p.Line, "column": p.Column, "path": p.Path, "found": p.Found, "want": p.Want})
	}
	return out
}
