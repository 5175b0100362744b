package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"strings"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/outside"
)

func (a *app) stagesCommand() *cobra.Command {
	var asJSON bool
	var plugins string
	cmd := &cobra.Command{
		Use:   "stages [TYPE]",
		Short: "List the stages, inside and outside alike, with their settings and defaults",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.listStages(cmd.Context(), plugins, args, asJSON)
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	pluginsFlag(cmd.Flags(), &plugins)
	cmd.AddCommand(a.tryCommand(), a.verifyCommand())
	return cmd
}

func (a *app) listStages(ctx context.Context, plugins string, only []string, asJSON bool) error {
	set, err := openStages(ctx, plugins, a.silent(), outside.OpenLater, nil)
	if err != nil {
		return err
	}
	defer set.close()
	list, err := set.list(only)
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
}

// quiet is a log for verbs that end by themselves: only what went wrong.
func (a *app) quiet() *slog.Logger {
	return slog.New(slog.NewTextHandler(a.err, &slog.HandlerOptions{Level: slog.LevelWarn}))
}

// silent is a log for verbs that tell themselves what went wrong.
func (a *app) silent() *slog.Logger { return slog.New(slog.DiscardHandler) }

// stageFacts is what is printed of a stage.
type stageFacts struct {
	Type     string          `json:"type"`
	Version  string          `json:"version"`
	Summary  string          `json:"summary"`
	Scope    pipeline.Scope  `json:"scope"`
	Reads    []string        `json:"reads"`
	Writes   []string        `json:"writes"`
	Stateful bool            `json:"stateful"`
	Runs     string          `json:"runs"`  // inside, or the program of its process
	State    outside.State   `json:"state"` // of its process; up where it runs inside
	Cause    string          `json:"cause"` // why it is not up
	Defaults json.RawMessage `json:"default_settings"`
	yaml     string
}

func (s *stageSet) list(only []string) ([]stageFacts, error) {
	cat := s.current()
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
		facts := stageFacts{Type: f.Type, Version: f.Version, Summary: f.Summary, Scope: f.Scope, Reads: f.Reads, Writes: f.Writes, Stateful: f.Stateful,
			Runs: "inside", State: outside.Up, Defaults: json.RawMessage("null")}
		if h, path := s.host(t); h != nil {
			st := h.Status()
			facts.Runs, facts.State = path, st.State
			if st.State != outside.Up {
				facts.Cause = st.LastError
			}
		}
		if f.Defaults != nil {
			if facts.yaml, err = configs.Show(f.Defaults); err == nil {
				facts.Defaults, err = configs.ShowJSON(f.Defaults)
			}
			if err != nil {
				return nil, fmt.Errorf("stage %s: %w", t, err)
			}
		}
		out = append(out, facts)
	}
	return out, nil
}

func (s stageFacts) print(w io.Writer) error {
	if s.State != outside.Up {
		_, err := fmt.Fprintf(w, "%s (runs %s) IS %s\n%s\n", s.Type, s.Runs, strings.ToUpper(string(s.State)), indent(s.Cause, "  "))
		return err
	}
	_, err := fmt.Fprintf(w, "%s (version %s, works on one %s, runs %s)\n  %s\n  reads: %s\n  writes: %s\n  settings and defaults:\n%s\n",
		s.Type, s.Version, s.Scope, s.Runs, s.Summary, orNone(s.Reads), orNone(s.Writes), indent(s.yaml, "    "))
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
