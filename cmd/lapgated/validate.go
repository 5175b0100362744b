package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/plugins/builtin"
)

func (a *app) validateCommand() *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "validate FILE|FOLDER ...",
		Short: "Check recipes and say file:line:column, what was found and what is allowed",
		Args:  cobra.MinimumNArgs(1),
		RunE:  func(_ *cobra.Command, args []string) error { return a.validate(args, asJSON) },
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

func (a *app) validate(paths []string, asJSON bool) error {
	cat, err := builtin.Catalogue()
	if err != nil {
		return err
	}
	var all []configs.Problem
	checked := 0
	for _, p := range paths {
		n, problems, err := configs.Validate(p, cat)
		if err != nil {
			return usageError{err}
		}
		checked += n
		all = append(all, problems...)
	}
	if asJSON {
		if err := printJSON(a.out, map[string]any{"files": checked, "problems": problemForms(all)}); err != nil {
			return err
		}
	} else {
		for _, p := range all {
			fmt.Fprintln(a.out, p.Error())
		}
	}
	if len(all) > 0 {
		return usageError{fmt.Errorf("%d problems in %d files", len(all), checked)}
	}
	fmt.Fprintf(a.err, "%d files are good\n", checked)
	return nil
}

func problemForms(list []configs.Problem) []map[string]any {
	out := []map[string]any{}
	for _, p := range list {
		out = append(out, map[string]any{"file": p.File, "line": p.Line, "column": p.Column, "path": p.Path, "found": p.Found, "want": p.Want})
	}
	return out
}
