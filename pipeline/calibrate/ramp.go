package calibrate

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster/files"
)

// RampStep is one step of a ramp; its frames are read when they are needed.
type RampStep struct {
	ExposureUS float64
	Photons    float64 // mean per pixel; 0 in every step = not known
	Read       func() (bright, dark [2]Frame, err error)
}

// Ramp is what a ramp of pairs says of the camera.
type Ramp struct {
	Points   []emva.Point `json:"points"`
	Figures  emva.Figures `json:"figures"`
	HalfStep int          `json:"half_step"` // number of the step nearest to half of saturation
	Bright   emva.Spatial `json:"bright"`    // of its bright pair
	Dark     emva.Spatial `json:"dark"`      // and of its dark pair
}

// rampColumns are those of ramp.csv; exposure_ns may stand for exposure_us.
func rampColumns() []string {
	return []string{"exposure_us", "photons_per_pixel", "bright_a", "bright_b", "dark_a", "dark_b"}
}

// RampFolder reads ramp.csv in dir: a line per step with exposure_us (or exposure_ns),
// photons_per_pixel where they are known, and the files bright_a, bright_b, dark_a and dark_b, relative
// to dir. Steps stand in the order of their light.
func RampFolder(dir string, stated pipeline.Capture, o files.Options) ([]RampStep, error) {
	path := filepath.Join(dir, "ramp.csv")
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	rows, err := csv.NewReader(bytes.NewReader(text)).ReadAll()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(rows) < 2 {
		return nil, pipeline.Invalid("%s: got no steps, want a heading and a line per step", path)
	}
	at := map[string]int{}
	for i, name := range rows[0] {
		at[strings.TrimSpace(name)] = i
	}
	var out []RampStep
	for i, row := range rows[1:] {
		step, err := rampStep(dir, row, at, stated, o)
		if err != nil {
			return nil, pipeline.Invalid("%s: line %d: %w", path, i+2, err)
		}
		out = append(out, step)
	}
	return out, nil
}

func rampStep(dir string, row []string, at map[string]int, stated pipeline.Capture, o files.Options) (RampStep, error) {
	number := func(name string) (float64, bool, error) {
		i, ok := at[name]
		if !ok {
			return 0, false, nil
		}
		v, err := strconv.ParseFloat(strings.TrimSpace(row[i]), 64)
		if err != nil || !(v >= 0) || math.IsInf(v, 0) {
			return 0, true, fmt.Errorf("%s: got %q, want a number of at least 0", name, row[i])
		}
		return v, true, nil
	}
	exposure, ok, err := number("exposure_us")
	if !ok {
		exposure, ok, err = number("exposure_ns")
		exposure /= 1000
	}
	if err != nil {
		return RampStep{}, err
	}
	photons, _, err := number("photons_per_pixel")
	if err != nil {
		return RampStep{}, err
	}
	var names [4]string
	for k, column := range rampColumns()[2:] {
		i, have := at[column]
		if !have || !ok {
			return RampStep{}, fmt.Errorf("column %s: not there, want %s", column, strings.Join(rampColumns(), ", "))
		}
		names[k] = filepath.Join(dir, filepath.FromSlash(row[i]))
	}
	stated.ExposureUS = exposure
	return RampStep{ExposureUS: exposure, Photons: photons, Read: func() (bright, dark [2]Frame, err error) {
		var all [4]Frame
		for k, name := range names {
			if all[k], err = readFrame(name, stated, o); err != nil {
				return bright, dark, fmt.Errorf("%s: %w", name, err)
			}
		}
		return [2]Frame{all[0], all[1]}, [2]Frame{all[2], all[3]}, nil
	}}, nil
}

// MeasureRamp takes the figures of a ramp and the spatial variances at the step nearest
// to half of saturation. check refuses frames that do not belong; nil = all do. It also
// returns which frames were used.
func MeasureRamp(steps []RampStep, check func(Frame) error) (Ramp, []SourceFrame, error) {
	var out Ramp
	var used []SourceFrame
	for i, step := range steps {
		bright, dark, err := step.Read()
		if err != nil {
			return Ramp{}, nil, pipeline.Invalid("ramp: step %d: %w", i+1, err)
		}
		p := emva.Point{ExposureUS: step.ExposureUS, Photons: step.Photons}
		for _, pair := range []struct {
			frames [2]Frame
			level  *emva.Level
		}{{bright, &p.Bright}, {dark, &p.Dark}} {
			if *pair.level, err = pairLevel(pair.frames, check); err != nil {
				return Ramp{}, nil, pipeline.Invalid("ramp: step %d: %w", i+1, err)
			}
			used = append(used, sourceFrame("ramp", pair.frames[0]), sourceFrame("ramp", pair.frames[1]))
		}
		out.Points = append(out.Points, p)
	}
	var err error
	if out.Figures, err = emva.Evaluate(out.Points); err != nil {
		return Ramp{}, nil, pipeline.Invalid("%w", err)
	}
	return out, used, out.patterns(steps)
}

func pairLevel(pair [2]Frame, check func(Frame) error) (emva.Level, error) {
	var counts [2][]uint16
	for k, f := range pair {
		if check != nil {
			if err := check(f); err != nil {
				return emva.Level{}, fmt.Errorf("%s: %w", f.Name, err)
			}
		}
		var err error
		if counts[k], err = f.Raw.Counts(); err != nil {
			return emva.Level{}, fmt.Errorf("%s: %w", f.Name, err)
		}
	}
	if len(counts[0]) != len(counts[1]) {
		return emva.Level{}, fmt.Errorf("%s and %s differ in size", pair[0].Name, pair[1].Name)
	}
	level := emva.Pair(counts[0], counts[1])
	if level.VarianceDN2 == 0 && level.MeanDN < float64(pair[0].Raw.Format.MaxCount()) && level.MeanDN > 0 {
		return level, fmt.Errorf("%s and %s do not differ, want two captures: a copied frame has no noise", pair[0].Name, pair[1].Name)
	}
	return level, nil
}

// patterns measures the spatial variances at half of saturation (EMVA Standard 1288).
func (r *Ramp) patterns(steps []RampStep) error {
	half := r.Figures.SaturationDN / 2
	off := func(i int) float64 { return math.Abs(r.Points[i].Bright.MeanDN - r.Points[i].Dark.MeanDN - half) }
	for i := range r.Points {
		if off(i) < off(r.HalfStep) {
			r.HalfStep = i
		}
	}
	bright, dark, err := steps[r.HalfStep].Read()
	if err != nil {
		return err
	}
	r.Bright, err = spatialOf(bright)
	if err != nil {
		return err
	}
	r.Dark, err = spatialOf(dark)
	return err
}

func spatialOf(pair [2]Frame) (emva.Spatial, error) {
	s := emva.NewStack(pair[0].Raw.Width, pair[0].Raw.Height)
	for _, f := range pair {
		counts, err := f.Raw.Counts()
		if err != nil {
			return emva.Spatial{}, err
		}
		s.Add(counts)
	}
	return s.Spatial(), nil
}
