package main

import (
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// calibrateFlags are the flags of calibrate.
type calibrateFlags struct {
	folders     calibrate.Folders
	camera      string
	light       string
	mode        string
	format      string
	capture     pipeline.Capture
	scale       pipeline.Scale
	significant int
	asJSON      bool
}

func (a *app) calibrateCommand() *cobra.Command {
	var f calibrateFlags
	cmd := &cobra.Command{
		Use:   "calibrate OUT-FOLDER --dark DIR [--stray DIR] [--response DIR]",
		Short: "Make a calibration folder from folders of frames",
		Args:  cobra.ExactArgs(1),
		RunE:  func(_ *cobra.Command, args []string) error { return a.calibrate(args[0], f) },
	}
	flags := cmd.Flags()
	flags.StringVar(&f.folders.Dark, "dark", "", "folder of frames with the lamp off (required)")
	flags.StringVar(&f.folders.Stray, "stray", "", "folder of frames with the lamp on and a light trap instead of the part")
	flags.StringVar(&f.folders.Response, "response", "", "folder of frames of a diffuser")
	flags.StringVar(&f.camera, "camera", "", "camera id")
	flags.StringVar(&f.light, "light", "", "light")
	flags.StringVar(&f.mode, "mode", "", "camera mode")
	flags.StringVar(&f.format, "pixel-format", "", "PFNC name of the frames; empty = as the files say")
	flags.Float64Var(&f.capture.ExposureUS, "exposure-us", 0, "exposure in µs, where no sidecar gives it")
	flags.Float64Var(&f.capture.GainDB, "gain-db", 0, "gain in dB, where no sidecar gives it")
	flags.Float64Var(&f.capture.BlackLevel, "black-level", 0, "black level in DN, where no sidecar gives it")
	flags.Float64Var(&f.scale.UMPerPx, "um-per-px", 0, "µm on the part per pixel")
	flags.Float64Var(&f.scale.UncertaintyUM, "um-per-px-uncertainty", 0, "standard uncertainty of the scale in µm per pixel; 0 = not stated")
	flags.IntVar(&f.significant, "significant-bits", 0, "bits that carry information in 16-bit files; 0 = as the files say")
	flags.BoolVar(&f.asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

func (a *app) calibrate(out string, f calibrateFlags) error {
	if f.folders.Dark == "" {
		return usageError{fmt.Errorf("--dark: not given, want the folder of frames with the lamp off")}
	}
	if f.format != "" {
		format, err := raster.ParsePixelFormat(f.format)
		if err != nil {
			return usageError{err}
		}
		f.capture.Format = format
	}
	if f.scale.UMPerPx > 0 {
		f.scale.Source = "stated"
	}
	made, err := calibrate.FromFolders(calibrate.Request{Camera: f.camera, Light: f.light, Mode: f.mode, Capture: f.capture, Scale: f.scale,
		MadeAt: time.Now().UTC().Format(time.RFC3339), Rules: calibrate.DefaultRules()}, f.folders, files.Options{SignificantBits: f.significant})
	if err != nil {
		return usageError{err}
	}
	if err := calibrate.Write(out, made); err != nil {
		return err
	}
	return a.reportCalibration(out, made, f.asJSON)
}

func (a *app) reportCalibration(out string, made calibrate.Made, asJSON bool) error {
	c := made.Calibration
	if asJSON {
		return printJSON(a.out, map[string]any{"folder": out, "hash": c.Hash, "capture": c.Capture, "noise": c.Noise, "scale": c.Scale,
			"bad_pixels": len(c.BadPixels), "stray": c.Stray != nil, "response": c.Response != nil})
	}
	_, err := fmt.Fprintf(a.out, "calibration %s\n  hash        %s\n  frames      %d × %d px, %s\n  noise       dark %.3f DN, gain %.4f DN per electron (0 = unknown)\n  bad pixels  %d\n  scale       %g µm per px (%s)\n",
		out, c.Hash, c.Capture.Width, c.Capture.Height, c.Capture.Format, c.Noise.DarkDN, c.Noise.GainDNPerE, len(c.BadPixels), c.Scale.UMPerPx, c.Scale.Source)
	return err
}
