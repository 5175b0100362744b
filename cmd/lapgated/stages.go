package main

import (
	"encoding/json"
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/builtin"
)

func (a *app) stagesCommand() *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "stages [TYPE]",
		Short: "List the stages with their settings and defaults",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(_ *cobra.Command, args []string) error {
			list, err := stageList(args)
			if err != nil {
				return err
			}
			if asJSON {
				return printJSON(a.out, map[string]any{"stages": list})
			}
			for _, s := range list {
				if err := s.print(a.out); err != nil {
					return err
				}
			}
			return nil
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

// stageFacts is what is printed of a stage.
type stageFacts struct {
	Type     string          `json:"type"`
	Version  string          `json:"version"`
	Summary  string          `json:"summary"`
	Scope    pipeline.Scope  `json:"scope"`
	Reads    []string        `json:"reads"`
	Writes   []string        `json:"writes"`
	Stateful bool            `json:"stateful"`
	Defaults json.RawMessage `json:"default_settings"`
	yaml     string
}

func stageList(only []string) ([]stageFacts, error) {
	cat, err := builtin.Catalogue()
	if err != nil {
		return nil, err
	}
	types := cat.Types()
	if len(only) > 0 {
		types = only
	}
	var out []stageFacts
	for _, t := range types {
		f, err := cat.Factory(t)
		if err != nil {
			return nil, err
		}
		text, err := configs.Show(f.Defaults)
		if err != nil {
			return nil, fmt.Errorf("stage %s: %w", t, err)
		}
		asJSON, err := configs.ShowJSON(f.Defaults)
		if err != nil {
			return nil, fmt.Errorf("stage %s: %w", t, err)
		}
		out = append(out, stageFacts{f.Type, f.Version, f.Summary, f.Scope, f.Reads, f.Writes, f.Stateful, asJSON, text})
	}
	return out, nil
}

func (s stageFacts) print(w io.Writer) error {
	_, err := fmt.Fprintf(w, "%s (version %s, works on one %s)\n  %s\n  reads: %s\n  writes: %s\n  settings and defaults:\n%s\n",
		s.Type, s.Version, s.Scope, s.Summary, orNone(s.Reads), orNone(s.Writes), indent(s.yaml, "    "))
	return err
}

func orNone(list []string) string {
	if len(list) == 0 {
		return "nothing"
	}
	return strings.Join(list, ", ")
}

func indent(text, by string) string {
	return by + strings.ReplaceAll(strings.TrimRight(text, "\n"), "\n", "\n"+by) + "\n"
}

// printJSON writes one document, indented, with a final newline.
func printJSON(w io.Writer, v any) error {
	enc := json.NewEncoder(w)
	enc.SetIndent("", "  ")
	enc.SetEscapeHTML(false)
	return enc.Encode(v)
}
