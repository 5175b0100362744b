package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/sync/errgroup"

	"lapgate/pipeline"
	"lapgate/pipeline/raster/files"
	"lapgate/pipeline/render"
)

// renderJob is one run of the render verb.
type renderJob struct {
	out             string
	units           int
	calibrationOnly bool
	workers         int
}

func (j renderJob) framesDir() string { return filepath.Join(j.out, "frames") }

// calibrationKinds lists the kinds of calibration frame with how many the scene wants.
func calibrationKinds(s render.Scene) map[string]int {
	kinds := map[string]int{render.FrameDark: s.Calibration.Dark, render.FrameStray: s.Calibration.Stray, render.FrameResponse: s.Calibration.Response,
		render.FramePart: s.Calibration.Part}
	for _, t := range s.Calibration.Targets {
		kinds[t.Name] = t.Frames
	}
	return kinds
}

func (j renderJob) total(r *render.Renderer) int {
	n := j.units
	for _, count := range calibrationKinds(r.Scene()) {
		n += count
	}
	return n * len(r.Views())
}

// calibration writes the calibration frames of all views and returns how many.
func (j renderJob) calibration(ctx context.Context, r *render.Renderer, p *progress) (int, error) {
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(j.workers)
	written := 0
	for _, view := range r.Views() {
		for kind, count := range calibrationKinds(r.Scene()) {
			dir := filepath.Join(j.out, "calibration", view, kind)
			if err := os.MkdirAll(dir, 0o755); err != nil {
				return 0, err
			}
			written += count
			for n := range count {
				group.Go(func() error {
					if err := ctx.Err(); err != nil {
						return err
					}
					f, err := calibrationFrame(r, kind, view, n)
					if err != nil {
						return err
					}
					defer p.done()
					return writeFrame(filepath.Join(dir, fmt.Sprintf("%03d.pgm", n)), f)
				})
			}
		}
	}
	return written, group.Wait()
}

// calibrationFrame takes a frame of a kind, or of a target of that name.
func calibrationFrame(r *render.Renderer, kind, view string, n int) (pipeline.Frame, error) {
	for _, t := range r.Scene().Calibration.Targets {
		if t.Name == kind {
			f, _, err := r.TargetFrame(view, t, n)
			return f, err
		}
	}
	return r.CalibrationFrame(kind, view, n)
}

// frames writes the frames of all units and, after all of them, the truth.
func (j renderJob) frames(ctx context.Context, r *render.Renderer, p *progress) ([]render.Truth, error) {
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(j.workers)
	truths := make([]render.Truth, j.units)
	for i := range j.units {
		group.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			views, truth, err := r.Shoot(r.Unit(i))
			if err != nil {
				return err
			}
			truths[i] = truth
			return j.writeUnit(views, p)
		})
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	return truths, j.writeTruth(truths)
}

func (j renderJob) writeUnit(views []pipeline.View, p *progress) error {
	for _, v := range views {
		h := v.Frames[0].Header
		dir := filepath.Join(j.framesDir(), h.Line)
		if err := os.MkdirAll(dir, 0o755); err != nil {
			return err
		}
		if err := writeFrame(filepath.Join(dir, h.Unit+"_"+v.Name+".pgm"), v.Frames[0]); err != nil {
			return err
		}
		p.done()
	}
	return nil
}

func (j renderJob) writeTruth(truths []render.Truth) error {
	var text bytes.Buffer
	enc := json.NewEncoder(&text)
	for _, t := range truths {
		if err := enc.Encode(t); err != nil {
			return err
		}
	}
	return writeWhole(filepath.Join(j.out, "truth.jsonl"), text.Bytes())
}

// writeFrame writes the pixels to a .pgm file and then the header beside them, so a
// header stands for a whole frame.
func writeFrame(path string, f pipeline.Frame) error {
	if err := files.Write(path, f.Raw); err != nil {
		return err
	}
	text, err := json.MarshalIndent(f.Header, "", "  ")
	if err != nil {
		return err
	}
	return writeWhole(strings.TrimSuffix(path, ".pgm")+".json", append(text, '\n'))
}

// writeWhole writes a file that appears whole or not at all.
func writeWhole(path string, data []byte) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.Remove(f.Name()) // fails once renamed, as it should
	_, err = f.Write(data)
	if closeErr := f.Close(); err == nil {
		err = closeErr
	}
	if err == nil {
		err = os.Chmod(f.Name(), 0o644)
	}
	if err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}
