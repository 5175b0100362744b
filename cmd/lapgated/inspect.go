package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/outside"
)

// inspectFlags are the flags of inspect.
type inspectFlags struct {
	recipe       string
	calibrations []string // VIEW=DIR
	unit         string
	overlay      string
	colour       string
	asJSON       bool
	gate         bool
	unfused      bool
	plugins      string
}

func (a *app) inspectCommand() *cobra.Command {
	var f inspectFlags
	cmd := &cobra.Command{
		Use:   "inspect --recipe R.yaml [--calibration VIEW=DIR ...] VIEW=FRAME ...",
		Short: "Inspect the frames of one unit from files, without a server",
		Long: "Inspect the frames of one unit from files, without a server. A frame's JSON sidecar (same name, .json), where there is one,\n" +
			"says how the camera was set. Exits 0 whatever the verdict, unless --gate asks for 0 accept, 3 reject, 4 hold.",
		Args: cobra.MinimumNArgs(1),
		RunE: func(_ *cobra.Command, args []string) error { return a.inspect(f, args) },
	}
	flags := cmd.Flags()
	flags.StringVar(&f.recipe, "recipe", "", "recipe file (required)")
	flags.StringArrayVar(&f.calibrations, "calibration", nil, "VIEW=DIR, the calibration folder of a view; repeat")
	flags.StringVar(&f.unit, "unit", "", "unit id; empty = that of the sidecar, else \"unit\"")
	flags.StringVar(&f.overlay, "overlay", "", "write a PNG with region and numbered defects; of several views, one beside the other")
	flags.StringVar(&f.colour, "colour", "refuse", "what becomes of colour pictures: refuse, luma, luma709, red, green or blue")
	flags.BoolVar(&f.asJSON, "json", false, "one JSON document on stdout")
	flags.BoolVar(&f.gate, "gate", false, "exit 0 for accept, 3 for reject, 4 for hold")
	flags.BoolVar(&f.unfused, "unfused", false, "run every stage by itself, for comparison")
	pluginsFlag(flags, &f.plugins)
	return cmd
}

func (a *app) inspect(f inspectFlags, args []string) error {
	if f.recipe == "" {
		return usageError{errors.New("--recipe: not given, want the recipe file")}
	}
	set, err := openStages(context.Background(), f.plugins, a.quiet(), outside.Open, nil)
	if err != nil {
		return err
	}
	defer set.close()
	p, err := buildFrom(f, set.current())
	if err != nil {
		return err
	}
	defer p.Close()
	id := pipeline.Identity{Part: p.Recipe.Part, Revision: p.Recipe.Revision, Surface: p.Recipe.Surface, Unit: f.unit,
		Line: "desk", Station: "desk", Attempt: 1, Purpose: pipeline.Setup}
	views, decodeMS, err := readViews(args, f.colour, &id)
	if err != nil {
		return err
	}
	e, j, results := p.InspectKeeping(context.Background(), id, views, time.Now())
	for i := range e.Views {
		e.Views[i].Milliseconds["decode"] = decodeMS[e.Views[i].Name]
	}
	if f.overlay != "" {
		if err := writeOverlay(f.overlay, e, j, results); err != nil {
			return err
		}
	}
	if f.gate {
		a.exit = map[pipeline.Verdict]int{pipeline.Accept: exitDone, pipeline.Reject: exitReject, pipeline.Hold: exitHold}[j.Verdict]
	}
	if f.asJSON {
		return printJSON(a.out, inspectionForm(id, e, j))
	}
	return printInspection(a.out, id, e, j)
}

func buildFrom(f inspectFlags, cat *pipeline.Catalogue) (*pipeline.Pipeline, error) {
	recipe, err := configs.LoadRecipe(f.recipe, cat)
	if err != nil {
		return nil, err
	}
	cals, err := loadCalibrations(f.calibrations)
	if err != nil {
		return nil, err
	}
	return pipeline.Build(recipe, cat, pipeline.Options{Calibrations: cals, ReadFile: beside(f.recipe), ProgramVersion: programVersion(), Unfused: f.unfused})
}

// beside reads files that lie beside a recipe; nothing above it.
func beside(recipe string) func(name string) ([]byte, error) {
	dir := os.DirFS(filepath.Dir(recipe))
	return func(name string) ([]byte, error) { return fs.ReadFile(dir, name) }
}

// readViews reads VIEW=FRAME arguments; a view that is named several times is a
// sequence, in the order given.
func readViews(args []string, colour string, id *pipeline.Identity) ([]pipeline.View, map[string]float64, error) {
	rule, err := colourRule(colour)
	if err != nil {
		return nil, nil, err
	}
	var views []pipeline.View
	ms := map[string]float64{}
	at := map[string]int{}
	for _, arg := range args {
		name, path, ok := strings.Cut(arg, "=")
		if !ok {
			return nil, nil, usageError{fmt.Errorf("argument: got %q, want VIEW=FRAME", arg)}
		}
		start := time.Now()
		frame, err := readFrame(name, path, rule, id)
		if err != nil {
			return nil, nil, usageError{fmt.Errorf("view %s: %w", name, err)}
		}
		ms[name] += float64(time.Since(start).Microseconds()) / 1000
		if _, seen := at[name]; !seen {
			at[name] = len(views)
			views = append(views, pipeline.View{Name: name})
		}
		views[at[name]].Frames = append(views[at[name]].Frames, frame)
	}
	if id.Unit == "" {
		id.Unit = "unit"
	}
	return views, ms, nil
}

func readFrame(view, path string, rule files.ColourRule, id *pipeline.Identity) (pipeline.Frame, error) {
	raw, err := files.Read(path, files.Options{Colour: rule})
	if err != nil {
		return pipeline.Frame{}, err
	}
	h, err := sidecar(path)
	if err != nil {
		return pipeline.Frame{}, err
	}
	if id.Unit == "" {
		id.Unit = h.Unit
	}
	if h.Format == 0 {
		h.Format = raw.Format
	}
	h.Identity, h.View, h.Width, h.Height, h.Stride = *id, view, raw.Width, raw.Height, raw.Stride
	h.CRC32C = pipeline.Checksum(raw.Data)
	raw.Format = widened(raw.Format, h.Format)
	h.Format = raw.Format
	return pipeline.Frame{Header: h, Raw: raw}, nil
}

// widened returns the format that the sidecar states where the file's layout is the
// same (Mono12 in a 16-bit file), else the file's.
func widened(file, stated raster.PixelFormat) raster.PixelFormat {
	if stated.Known() && stated.BitsPerPixel() == file.BitsPerPixel() && stated.SignificantBits() <= file.SignificantBits() {
		return stated
	}
	return file
}

// sidecar reads the header beside a frame; none is no error.
func sidecar(path string) (pipeline.FrameHeader, error) {
	var h pipeline.FrameHeader
	name := strings.TrimSuffix(path, filepath.Ext(path)) + ".json"
	text, err := os.ReadFile(name)
	if errors.Is(err, os.ErrNotExist) {
		return h, nil
	}
	if err != nil {
		return h, err
	}
	if err := json.Unmarshal(text, &h); err != nil {
		return h, fmt.Errorf("%s: %w", name, err)
	}
	return h, nil
}

func colourRule(name string) (files.ColourRule, error) {
	rules := map[string]files.ColourRule{"refuse": files.ColourRefuse, "luma": files.ColourLuma, "luma709": files.ColourLuma709,
		"red": files.ColourRed, "green": files.ColourGreen, "blue": files.ColourBlue}
	rule, ok := rules[name]
	if !ok {
		return 0, usageError{fmt.Errorf("--colour: got %q, want refuse, luma, luma709, red, green or blue", name)}
	}
	return rule, nil
}
