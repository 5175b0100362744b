package main

import (
	"context"
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/builtin"
	"lapgate/plugins/outside"
	"lapgate/plugins/stagetest"
)

// verifyFlags are the flags of stages verify.
type verifyFlags struct {
	args   []string
	with   []string
	env    []string
	frames int
	asJSON bool
}

func (a *app) verifyCommand() *cobra.Command {
	var f verifyFlags
	cmd := &cobra.Command{
		Use:   "verify PATH",
		Short: "Start a plug-in that nobody here has seen, put it through the conformance suite and say what holds",
		Args:  cobra.ExactArgs(1),
		RunE:  func(cmd *cobra.Command, paths []string) error { return a.verify(cmd.Context(), paths[0], f) },
	}
	cmd.Flags().StringArrayVar(&f.args, "arg", nil, "an argument for the program; repeat")
	cmd.Flags().StringArrayVar(&f.with, "with", nil, "KEY=VALUE, a setting instead of its default; repeat")
	cmd.Flags().StringArrayVar(&f.env, "env", nil, "KEY=VALUE in the program's environment; repeat")
	cmd.Flags().IntVar(&f.frames, "frames", 1, "frames in the view that the stage gets")
	cmd.Flags().BoolVar(&f.asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

func (a *app) verify(ctx context.Context, path string, flags verifyFlags) error {
	set := outside.DefaultSettings()
	set.Name, set.Path, set.Args = filepath.Base(path), path, flags.args
	set.Env = map[string]string{}
	for _, e := range flags.env {
		key, value, ok := strings.Cut(e, "=")
		if !ok {
			return usageError{fmt.Errorf("--env: got %q, want KEY=VALUE", e)}
		}
		set.Env[key] = value
	}
	h, err := outside.Open(ctx, set, a.quiet())
	if err != nil {
		return err
	}
	defer h.Close()
	f, cat, err := flags.factory(h.Factory())
	if err != nil {
		return err
	}
	verdicts := stagetest.Verify(f, itemsFor(cat, f, max(flags.frames, 1)))
	verdicts = append(verdicts, survived(h.Status()))
	failed := 0
	for _, v := range verdicts {
		if !v.Pass && v.Skipped == "" {
			failed++
		}
	}
	if flags.asJSON {
		err = printJSON(a.out, map[string]any{"stage": f.Type, "version": f.Version, "summary": f.Summary, "bound_by": h.Status().Isolation, "verdicts": verdicts})
	} else {
		err = a.printVerdicts(f, verdicts)
	}
	if err == nil && failed > 0 {
		err = fmt.Errorf("%s: %d of %d properties do not hold", path, failed, len(verdicts))
	}
	return err
}

// factory returns the stage with the settings of --with in place of its defaults, and a
// catalogue that has it.
func (v verifyFlags) factory(f pipeline.Factory) (pipeline.Factory, *pipeline.Catalogue, error) {
	cat, err := builtin.Catalogue(f)
	if err != nil { // it has the type of a stage inside, as such a stage served outside has
		cat, err = builtin.Catalogue()
	}
	if err != nil || len(v.with) == 0 {
		return f, cat, err
	}
	recipe, err := tryFlags{with: v.with, umPerPx: 10}.recipe(cat, f.Type, 1)
	if err != nil {
		return f, cat, err
	}
	specs := recipe.Unit
	if f.Scope == pipeline.ScopeView {
		specs = recipe.Views[0].Stages
	}
	inner, given := f.New, specs[len(specs)-1].Decode
	f.New = func(_ pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
		return inner(given, env)
	}
	return f, cat, nil
}

// survived is the verdict on the process itself.
func survived(s outside.Status) stagetest.Verdict {
	v := stagetest.Verdict{Property: "survived", Wanted: "The process lived through all of this, and no answer of it had to be refused.", Pass: s.Restarts == 0 && s.State == outside.Up}
	if !v.Pass {
		v.Findings = []string{fmt.Sprintf("%s after %d restarts: %s", s.State, s.Restarts, s.LastError)}
	}
	return v
}

func (a *app) printVerdicts(f pipeline.Factory, verdicts []stagetest.Verdict) error {
	fmt.Fprintf(a.out, "%s (version %s): %s\n", f.Type, f.Version, f.Summary)
	for _, v := range verdicts {
		word := "holds"
		switch {
		case v.Skipped != "":
			word = "skipped (" + v.Skipped + ")"
		case !v.Pass:
			word = "DOES NOT HOLD"
		}
		fmt.Fprintf(a.out, "%-16s %s: %s\n", v.Property, word, v.Wanted)
		for _, finding := range v.Findings {
			fmt.Fprintf(a.out, "%16s %s\n", "", finding)
		}
	}
	return nil
}

// itemsFor makes items as a stage gets them: after those inside stages, with their
// defaults, that write what it reads.
func itemsFor(cat *pipeline.Catalogue, f pipeline.Factory, frames int) stagetest.Maker {
	before := needed(cat, f)
	return func(raw raster.Raw) *pipeline.Item {
		item := verifyItem(raw)
		item.Frames = slices.Repeat(item.Frames, frames)
		for _, t := range before {
			if err := runBefore(cat, t, item); err != nil {
				panic(fmt.Sprintf("stage %s before it: %v", t, err))
			}
		}
		if f.Scope == pipeline.ScopeUnit {
			for i := range item.Defects {
				item.Defects[i].ID = i + 1
			}
			return &pipeline.Item{Views: []*pipeline.Item{item}, Defects: item.Defects}
		}
		return item
	}
}

func runBefore(cat *pipeline.Catalogue, typ string, item *pipeline.Item) error {
	f, err := cat.Factory(typ)
	if err != nil {
		return err
	}
	stage, _, err := f.New(nil, pipeline.Environment{View: item.View, Calibration: item.Calibration, Geometry: item.Geometry})
	if err != nil {
		return err
	}
	return stage.Run(context.Background(), item)
}

// verifyItem is a view with a calibration that is not flat.
func verifyItem(raw raster.Raw) *pipeline.Item {
	w, h := raw.Width, raw.Height
	dark, response := raster.NewPlane(w, h), raster.NewPlane(w, h)
	for i := range response.Pix {
		dark.Pix[i] = float32(i % 3)
		response.Pix[i] = 0.9 + 0.05*float32(i%5)
	}
	cal := &pipeline.Calibration{Hash: "verify", Dark: dark, Response: response, BadPixels: []pipeline.PixelAt{{X: 0, Y: 0}}}
	return &pipeline.Item{View: "view", Frames: []pipeline.Frame{{Raw: raw}}, Calibration: cal, Geometry: pipeline.Planar{UMPerPx: 10}}
}
