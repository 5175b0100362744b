package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/outside"
	"lapgate/server/report"
)

// tryFlags are the flags of stages try.
type tryFlags struct {
	with    []string
	before  []string
	umPerPx float64
	dir     string
	colour  string
	plugins string
	asJSON  bool
}

func (a *app) tryCommand() *cobra.Command {
	var f tryFlags
	cmd := &cobra.Command{
		Use:   "try TYPE FRAME ... [--with KEY=VALUE ...]",
		Short: "Run one stage on a frame, after the stages it reads from, and write what it made as pictures",
		Long: "Run one stage on a frame (or the frames of a sequence), after the stages that write what it reads, with their defaults.\n" +
			"Each plane that the stage made becomes a PNG, stretched between its 0.5 and 99.9 percentile, with a key below; small ones are enlarged.\n" +
			"overlay.png shows region and defects on the frame, or on the stage's first plane where the view is a sequence.",
		Args: cobra.MinimumNArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error { return a.try(cmd.Context(), f, args[0], args[1:]) },
	}
	flags := cmd.Flags()
	flags.StringArrayVar(&f.with, "with", nil, "KEY=VALUE, a setting of the stage as in a recipe; repeat")
	flags.StringArrayVar(&f.before, "before", nil, "a stage to run before it, such as '{type: region, shape: found_circle, diameter_mm: 25}'; repeat. None = those that it reads from, with their defaults")
	flags.Float64Var(&f.umPerPx, "um-per-px", 10, "scale of the frame")
	flags.StringVar(&f.dir, "dir", ".", "folder for the pictures")
	flags.StringVar(&f.colour, "colour", "refuse", "what becomes of colour pictures: refuse, luma, luma709, red, green or blue")
	flags.BoolVar(&f.asJSON, "json", false, "one JSON document on stdout")
	pluginsFlag(flags, &f.plugins)
	return cmd
}

func (a *app) try(ctx context.Context, f tryFlags, typ string, frames []string) error {
	set, err := openStages(ctx, f.plugins, a.quiet(), outside.Open, nil)
	if err != nil {
		return err
	}
	defer set.close()
	recipe, err := f.recipe(set.current(), typ, len(frames))
	if err != nil {
		return err
	}
	p, err := pipeline.Build(recipe, set.current(), pipeline.Options{ReadFile: beside("."), ProgramVersion: programVersion(), Unfused: true})
	if err != nil {
		return err
	}
	defer p.Close()
	id := pipeline.Identity{Part: "try", Unit: "try", Line: "desk", Station: "desk", Attempt: 1, Purpose: pipeline.Setup}
	var args []string
	for _, frame := range frames {
		args = append(args, "view="+frame)
	}
	views, _, err := readViews(args, f.colour, &id)
	if err != nil {
		return err
	}
	e, _, results := p.InspectKeeping(ctx, id, views, time.Now())
	for _, failed := range e.Failures {
		if failed.Reason != pipeline.ReasonUnproven {
			return pipeline.Invalid("stage %s: %s: %s", failed.Stage, failed.Reason, failed.Detail)
		}
	}
	factory, err := set.current().Factory(typ)
	if err != nil {
		return err
	}
	written, err := f.pictures(results[0].Item, e, factory)
	if err != nil {
		return err
	}
	return a.printTried(f, typ, e, results[0], written)
}

// recipe writes a recipe around the one stage and reads it, so that its settings are
// checked as a recipe's are.
func (f tryFlags) recipe(cat *pipeline.Catalogue, typ string, frames int) (*pipeline.Recipe, error) {
	factory, err := cat.Factory(typ)
	if err != nil {
		return nil, err
	}
	earlier := f.before
	if len(earlier) == 0 {
		for _, t := range needed(cat, factory) {
			earlier = append(earlier, "{type: "+t+"}")
		}
	}
	one := "type: " + typ
	for _, w := range f.with {
		key, value, ok := strings.Cut(w, "=")
		if !ok {
			return nil, usageError{fmt.Errorf("--with: got %q, want KEY=VALUE", w)}
		}
		one += "\n        " + key + ": " + value
	}
	text := fmt.Sprintf("format: 1\npart: try\nmin_coverage: 0\nlimits:\n  - {name: none, each: diameter_um, at_most: 1000000000, unit: um}\n"+
		"views:\n  - name: view\n    calibration: none\n    proofs: none\n    um_per_px: %g\n    frames: %d\n    stages:\n", f.umPerPx, frames)
	for _, s := range earlier {
		text += "      - " + s + "\n"
	}
	if factory.Scope == pipeline.ScopeView {
		text += "      - " + one + "\n"
	} else {
		text += "unit:\n      - " + one + "\n"
	}
	recipe, err := configs.DecodeRecipe("--with", []byte(text), cat)
	var problems configs.Problems
	if errors.As(err, &problems) { // lines of a text that nobody wrote say nothing
		var lines []string
		for _, p := range problems {
			p.File, p.Line = "--with", 0
			p.Path = p.Path[strings.LastIndex(p.Path, "]")+1:]
			lines = append(lines, strings.Replace(p.Error(), ": .", ": ", 1))
		}
		return nil, usageError{errors.New(strings.Join(lines, "\n"))}
	}
	return recipe, err
}

// needed lists the stages that write what a stage reads, and what those read, in order.
func needed(cat *pipeline.Catalogue, f pipeline.Factory) []string {
	usual := []string{"region", "flatfield", "darkfield", "blobs"}
	reads := f.Reads
	if f.Scope == pipeline.ScopeUnit {
		reads = []string{"defects"}
	}
	want := map[string]bool{}
	for i := len(usual) - 1; i >= 0; i-- {
		g, err := cat.Factory(usual[i])
		if err != nil || usual[i] == f.Type {
			continue
		}
		if slices.ContainsFunc(g.Writes, func(w string) bool { return slices.Contains(reads, w) }) {
			want[usual[i]] = true
			reads = append(slices.Clone(reads), g.Reads...)
		}
	}
	return slices.DeleteFunc(usual, func(t string) bool { return !want[t] })
}

// pictures writes every plane and the overlay and returns the files.
func (f tryFlags) pictures(item *pipeline.Item, e pipeline.Evidence, stage pipeline.Factory) ([]string, error) {
	if err := os.MkdirAll(f.dir, 0o755); err != nil {
		return nil, err
	}
	var written []string
	create := func(name string, write func(io.Writer) error) error {
		path := filepath.Join(f.dir, name+".png")
		out, err := os.Create(path)
		if err != nil {
			return err
		}
		written = append(written, path)
		return errors.Join(write(out), out.Close())
	}
	for _, name := range slices.Sorted(maps.Keys(item.Planes)) {
		if err := create(name, func(w io.Writer) error { return writePlane(w, name, item.Planes[name]) }); err != nil {
			return nil, err
		}
	}
	name, picture, err := background(item, stage)
	if err != nil {
		return nil, err
	}
	k := enlargement(picture.Width, picture.Height)
	v := report.OverlayView{Name: name, Frame: enlarged(picture, k), Region: enlargedRegion(fitting(item.Region, picture), k), Defects: enlargedDefects(e.Defects, k)}
	return written, create("overlay", func(w io.Writer) error { return report.WriteOverlay(w, []report.OverlayView{v}) })
}

// background is what region and defects are drawn on: the frame, or, of a sequence, whose
// frames show little by themselves, the first plane of its size that the stage says it writes.
func background(item *pipeline.Item, stage pipeline.Factory) (string, *raster.Plane, error) {
	frame, err := item.Raw()
	if err != nil || len(item.Frames) == 1 {
		return item.View, frame, err
	}
	for _, name := range stage.Writes {
		if p, ok := item.Planes[name]; ok && p.Step == 1 && p.Pixels.SameSize(frame) {
			return name, p.Pixels, nil
		}
	}
	return item.View, frame, nil
}

// fitting returns a region that has the size of the frame; nil otherwise.
func fitting(r *pipeline.Region, frame *raster.Plane) *pipeline.Region {
	if r == nil || r.Mask().Width != frame.Width || r.Mask().Height != frame.Height {
		return nil
	}
	return r
}

func (a *app) printTried(f tryFlags, typ string, e pipeline.Evidence, r pipeline.ViewResult, written []string) error {
	if f.asJSON {
		return printJSON(a.out, map[string]any{"stage": typ, "files": written, "milliseconds": r.Milliseconds, "measurements": append(r.Item.Measurements, e.Measurements...),
			"proofs": r.Item.Proofs, "defects": e.Defects, "coverage": r.Item.Coverage})
	}
	for _, file := range written {
		fmt.Fprintln(a.out, "wrote", file)
	}
	for _, m := range append(r.Item.Measurements, e.Measurements...) {
		fmt.Fprintf(a.out, "%s: %g %s\n", m.Name, m.Value, m.Unit)
	}
	for _, p := range r.Item.Proofs {
		fmt.Fprintf(a.out, "proof %s: %g within %g to %g %s: ok %v %s\n", p.Name, p.Value, p.Low, p.High, p.Unit, p.OK, p.Reason)
	}
	_, err := fmt.Fprintf(a.out, "%d defects, coverage %.4f, %.1f ms in %s\n", len(e.Defects), r.Item.Coverage.Share, r.Milliseconds[typ], typ)
	return err
}
