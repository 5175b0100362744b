package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/server/ledger"
)

// recipeBuilder makes pipelines with the calibrations of a line and station: those in
// CALIBRATIONS/LINE/STATION/VIEW, else CALIBRATIONS/LINE/VIEW, else CALIBRATIONS/VIEW.
type recipeBuilder struct {
	stages       *stageSet
	calibrations string
	ledger       *ledger.Store
}

// ledgerTimeout bounds what a build asks of the ledger.
const ledgerTimeout = 10 * time.Second

// earlier returns what a station showed before, as the ledger has it.
func (b recipeBuilder) earlier(line, station string) func(view string, most int) ([]pipeline.FrameHeader, error) {
	return func(view string, most int) ([]pipeline.FrameHeader, error) {
		ctx, cancel := context.WithTimeout(context.Background(), ledgerTimeout)
		defer cancel()
		return b.ledger.FramesBefore(ctx, line, station, view, most)
	}
}

// lookAgain is how often a pipeline's calibration folders are looked at for a change.
const lookAgain = 2 * time.Second

func (b recipeBuilder) build(r *pipeline.Recipe, line, station string) (*pipeline.Pipeline, func() bool, error) {
	cals := map[string]*pipeline.Calibration{}
	var dirs []string
	for _, v := range r.Views {
		if v.NoCalibration {
			continue
		}
		dir, err := b.folder(line, station, v.Name)
		if err != nil {
			return nil, nil, err
		}
		if cals[v.Name], err = calibrate.Load(dir); err != nil {
			return nil, nil, fmt.Errorf("calibration of view %s: %w", v.Name, err)
		}
		dirs = append(dirs, dir)
	}
	cat, revision := b.stages.now()
	p, err := pipeline.Build(r, cat, pipeline.Options{Calibrations: cals, ReadFile: beside(r.File), ProgramVersion: programVersion(),
		Earlier: b.earlier(line, station)})
	changed := staleness(dirs)
	return p, func() bool {
		_, now := b.stages.now()
		return now != revision || changed()
	}, err
}

func (b recipeBuilder) folder(line, station, view string) (string, error) {
	tries := []string{filepath.Join(b.calibrations, line, station, view), filepath.Join(b.calibrations, line, view), filepath.Join(b.calibrations, view)}
	for _, dir := range tries {
		if _, err := os.Stat(filepath.Join(dir, "calibration.json")); err == nil {
			return dir, nil
		}
	}
	return "", pipeline.NotFound("no calibration of view %s: looked in %v; make one with `lapgated calibrate`", view, tries)
}

// staleness returns a function that reports whether a calibration has changed.
func staleness(dirs []string) func() bool {
	var mu sync.Mutex
	was, looked, stale := stamps(dirs), time.Now(), false
	return func() bool {
		mu.Lock()
		defer mu.Unlock()
		if !stale && time.Since(looked) > lookAgain {
			looked = time.Now()
			stale = stamps(dirs) != was
		}
		return stale
	}
}

// stamps is the size and time of each calibration's description.
func stamps(dirs []string) string {
	out := ""
	for _, d := range dirs {
		if info, err := os.Stat(filepath.Join(d, "calibration.json")); err == nil {
			out += fmt.Sprintf("%s %d %d\n", d, info.Size(), info.ModTime().UnixNano())
		}
	}
	return out
}
