package main

import (
	"fmt"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/calibrate/emva"
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
	certificate dots.Certificate
	diameters   string
	patch       string
	part        calibrate.PartSearch
	significant int
	report      string
	asJSON      bool
}

func (a *app) calibrateCommand() *cobra.Command {
	var f calibrateFlags
	cmd := &cobra.Command{
		Use:   "calibrate OUT-FOLDER --dark DIR [--stray DIR] [--response DIR] [--ramp DIR] [--dots DIR] [--sizing DIR] [--part DIR]",
		Short: "Make a calibration folder from folders of frames",
		Long: "Make a calibration folder from folders of frames, all taken with the same camera settings (a ramp and a dot target may be exposed\n" +
			"otherwise). A frame's JSON sidecar (same name, .json) may say sensor_c, the camera's temperature. --report writes a page to read.",
		Args: cobra.ExactArgs(1),
		RunE: func(_ *cobra.Command, args []string) error { return a.calibrate(args[0], f) },
	}
	f.addFrameFlags(cmd.Flags())
	f.addTargetFlags(cmd.Flags())
	return cmd
}

func (f *calibrateFlags) addFrameFlags(flags *pflag.FlagSet) {
	flags.StringVar(&f.folders.Dark, "dark", "", "folder of frames with the lamp off (required)")
	flags.StringVar(&f.folders.Stray, "stray", "", "folder of frames with the lamp on and a light trap instead of the part")
	flags.StringVar(&f.folders.Response, "response", "", "folder of frames of a diffuser")
	flags.StringVar(&f.folders.Ramp, "ramp", "", "folder with ramp.csv (exposure_us, photons_per_pixel, bright_a, bright_b, dark_a, dark_b) and the pairs of frames it names")
	flags.StringVar(&f.camera, "camera", "", "camera id")
	flags.StringVar(&f.light, "light", "", "light")
	flags.StringVar(&f.mode, "mode", "", "camera mode")
	flags.StringVar(&f.format, "pixel-format", "", "PFNC name of the frames; empty = as the files say")
	flags.Float64Var(&f.capture.ExposureUS, "exposure-us", 0, "exposure in µs, where no sidecar gives it")
	flags.Float64Var(&f.capture.GainDB, "gain-db", 0, "gain in dB, where no sidecar gives it")
	flags.Float64Var(&f.capture.BlackLevel, "black-level", 0, "black level in DN, where no sidecar gives it")
	flags.IntVar(&f.significant, "significant-bits", 0, "bits that carry information in 16-bit files; 0 = as the files say")
	flags.StringVar(&f.report, "report", "", "write the calibration as an HTML page to this file")
	flags.BoolVar(&f.asJSON, "json", false, "one JSON document on stdout")
}

func (f *calibrateFlags) addTargetFlags(flags *pflag.FlagSet) {
	flags.Float64Var(&f.scale.UMPerPx, "um-per-px", 0, "µm on the part per pixel, where no dot target gives it")
	flags.Float64Var(&f.scale.UncertaintyUM, "um-per-px-uncertainty", 0, "standard uncertainty of the scale in µm per pixel; 0 = not stated")
	flags.StringVar(&f.folders.Dots, "dots", "", "folder of frames of a dot target, which gives scale and distortion")
	flags.Float64Var(&f.certificate.PitchUM, "dot-pitch-um", 0, "pitch of its dots in µm")
	flags.StringVar(&f.certificate.Serial, "certificate-serial", "", "serial of the target")
	flags.StringVar(&f.certificate.Date, "certificate-date", "", "date of its certificate, YYYY-MM-DD")
	flags.Float64Var(&f.certificate.UncertaintyUM, "certificate-uncertainty-um", 0, "standard uncertainty of the pitch in µm: half of the one stated at k = 2")
	flags.StringVar(&f.folders.Sizing, "sizing", "", "folder of frames of a target with dots of known diameters")
	flags.StringVar(&f.diameters, "sizing-diameters", "", "CSV file of their diameters in µm, a line per row from the top; empty = no dot there")
	flags.StringVar(&f.patch, "patch", "", "reference patch as X,Y,W,H in px, seen in the frames of the part, or else of the light trap")
	flags.StringVar(&f.folders.Part, "part", "", "folder of frames of a conforming round part, for focus and scale")
	flags.Float64Var(&f.part.DiameterMM, "part-diameter-mm", 0, "its diameter in mm")
	flags.StringVar(&f.part.Polarity, "part-polarity", "bright", "how it looks against its surroundings: bright, dark or rim")
}

func (a *app) calibrate(out string, f calibrateFlags) error {
	req, err := f.request()
	if err != nil {
		return usageError{err}
	}
	made, err := calibrate.FromFolders(req, f.folders, files.Options{SignificantBits: f.significant})
	if err != nil {
		return usageError{err}
	}
	if err := calibrate.Write(out, made); err != nil {
		return err
	}
	if f.report != "" {
		if err := writeCalibrationPage(f.report, made); err != nil {
			return err
		}
	}
	return a.reportCalibration(out, made, f.asJSON)
}

func (f calibrateFlags) request() (calibrate.Request, error) {
	req := calibrate.Request{Camera: f.camera, Light: f.light, Mode: f.mode, Capture: f.capture, Scale: f.scale, Certificate: f.certificate,
		Part: f.part, MadeAt: time.Now().UTC().Format(time.RFC3339), Rules: calibrate.DefaultRules()}
	if f.folders.Dark == "" {
		return req, fmt.Errorf("--dark: not given, want the folder of frames with the lamp off")
	}
	if f.scale.UMPerPx > 0 {
		req.Scale.Source = "stated"
	}
	var err error
	if f.format != "" {
		if req.Capture.Format, err = raster.ParsePixelFormat(f.format); err != nil {
			return req, err
		}
	}
	if req.Patch, err = parsePatch(f.patch); err != nil {
		return req, err
	}
	if f.diameters != "" {
		req.SizingDiameters, err = readDiameters(f.diameters)
	}
	return req, err
}

func (a *app) reportCalibration(out string, made calibrate.Made, asJSON bool) error {
	c, p := made.Calibration, made.Provenance
	if asJSON {
		return printJSON(a.out, map[string]any{"folder": out, "hash": c.Hash, "capture": c.Capture, "noise": c.Noise, "scale": c.Scale,
			"bad_pixels": len(c.BadPixels), "stray": c.Stray != nil, "response": c.Response != nil,
			"distortion": c.Distortion, "sizing": c.Sizing, "sensor_temperature": c.Sensor, "reference_patch": c.Reference, "part_edge": c.PartEdge,
			"ramp": p.Ramp, "dot_target": p.Target})
	}
	text := fmt.Sprintf("calibration %s\n  hash        %s\n  frames      %d × %d px, %s\n  noise       dark %.3f DN, gain %.4f DN per electron (0 = unknown)\n  bad pixels  %d\n  scale       %.6g ± %.2g µm per px (%s)\n",
		out, c.Hash, c.Capture.Width, c.Capture.Height, c.Capture.Format, c.Noise.DarkDN, c.Noise.GainDNPerE, len(c.BadPixels), c.Scale.UMPerPx, c.Scale.UncertaintyUM, c.Scale.Source)
	if r := p.Ramp; r != nil {
		text += fmt.Sprintf("  ramp        K %.4g ± %.2g DN per electron, saturation %.0f electrons, SNR max %.1f dB, dynamic range %.1f dB\n",
			r.Figures.GainDNPerE, r.Figures.GainU, r.Figures.SaturationE, emva.Decibels(r.Figures.SNRMax), emva.Decibels(r.Figures.DynamicRange))
	}
	if c.Distortion != nil {
		text += fmt.Sprintf("  distortion  k1 %.5f, k2 %.5f about (%.1f, %.1f) px\n", c.Distortion.K1, c.Distortion.K2, c.Distortion.CentreX, c.Distortion.CentreY)
	}
	if c.Sizing != nil {
		text += "  sizing      " + dots.Describe(*c.Sizing) + "\n"
	}
	if c.Reference != nil {
		text += fmt.Sprintf("  patch       %.2f DN above dark\n", c.Reference.LevelDN)
	}
	if c.PartEdge != nil {
		text += fmt.Sprintf("  part        edge %.2f px wide, diameter %.2f px\n", c.PartEdge.WidthPx, c.PartEdge.DiameterPx)
	}
	_, err := fmt.Fprint(a.out, text)
	return err
}
