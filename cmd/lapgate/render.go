package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"runtime"
	"strings"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/render"
)

// renderCommand draws the frames of a scene into a folder.
func renderCommand() *cobra.Command {
	var scene string
	var asJSON bool
	job := renderJob{}
	cmd := &cobra.Command{
		Use:   "render --scene FILE --out DIR",
		Short: "Draw frames of parts that do not exist, with the truth beside them",
		Long: `Draw frames of parts that do not exist, with the truth beside them.

DIR/calibration/VIEW/{dark,stray,response,part}/NNN.pgm   frames to calibrate with
DIR/frames/LINE/UNIT_VIEW.pgm and .json              frames and their headers
DIR/truth.jsonl                                      what is true, one unit a line; written last

The same scene gives the same bytes, whatever the number of workers.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			s, err := loadScene(scene)
			if err != nil {
				return err
			}
			summary, err := job.run(cmd.Context(), s, cmd.ErrOrStderr())
			if err != nil {
				return err
			}
			return summary.print(cmd.OutOrStdout(), asJSON)
		},
	}
	flags := cmd.Flags()
	flags.StringVar(&scene, "scene", "", "scene file (YAML)")
	flags.StringVar(&job.out, "out", "", "folder to write to; it must not hold frames yet")
	flags.IntVar(&job.units, "units", 0, "number of units; 0 = as the scene says")
	flags.BoolVar(&job.calibrationOnly, "calibration-only", false, "draw the calibration frames alone")
	flags.IntVar(&job.workers, "workers", runtime.NumCPU(), "frames drawn at once")
	flags.BoolVar(&asJSON, "json", false, "print the summary as JSON")
	cobra.CheckErr(cmd.MarkFlagRequired("scene"))
	cobra.CheckErr(cmd.MarkFlagRequired("out"))
	return cmd
}

// loadScene reads and checks a scene; the error says where in the file it is wrong.
func loadScene(path string) (render.Scene, error) {
	s, src, err := configs.Load[render.Scene](path)
	if err != nil {
		return s, &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	}
	if err := s.Check(); err != nil {
		key, _, _ := strings.Cut(err.Error(), ":")
		return s, pipeline.Invalid("%s: %w", src.At(key), err)
	}
	return s, nil
}

// renderSummary is what a run wrote.
type renderSummary struct {
	Out               string `json:"out"`
	CalibrationFrames int    `json:"calibration_frames"`
	Units             int    `json:"units"`
	Frames            int    `json:"frames"`
	Conforming        int    `json:"conforming"`
	NearLimit         int    `json:"near_limit"` // units with a worst value within ±10 % of its limit
}

func (s renderSummary) print(w io.Writer, asJSON bool) error {
	if asJSON {
		return json.NewEncoder(w).Encode(s)
	}
	_, err := fmt.Fprintf(w, "%s: %d calibration frames, %d frames of %d units (%d conforming, %d near a limit)\n",
		s.Out, s.CalibrationFrames, s.Frames, s.Units, s.Conforming, s.NearLimit)
	return err
}

func (j renderJob) run(ctx context.Context, s render.Scene, messages io.Writer) (renderSummary, error) {
	if err := j.check(); err != nil {
		return renderSummary{}, err
	}
	if j.units == 0 {
		j.units = s.Units
	}
	if j.calibrationOnly {
		j.units = 0
	}
	r, err := render.New(s)
	if err != nil {
		return renderSummary{}, err
	}
	if ctx == nil {
		ctx = context.Background()
	}
	progress := showProgress(messages, j.total(r))
	defer progress.stop()
	sum := renderSummary{Out: j.out, Units: j.units, Frames: j.units * len(r.Views())}
	if sum.CalibrationFrames, err = j.calibration(ctx, r, progress); err != nil || j.calibrationOnly {
		return sum, err
	}
	truths, err := j.frames(ctx, r, progress)
	for _, t := range truths {
		if t.Conforming {
			sum.Conforming++
		}
		if t.NearLimit {
			sum.NearLimit++
		}
	}
	return sum, err
}

func (j renderJob) check() error {
	if j.units < 0 || j.workers < 1 {
		return pipeline.Invalid("units, workers: got %d, %d, want at least 0 and 1", j.units, j.workers)
	}
	if _, err := os.Stat(j.framesDir()); err == nil {
		return pipeline.Invalid("out: %s is there already; name another folder, or move it away", j.framesDir())
	}
	return nil
}
