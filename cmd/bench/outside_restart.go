package main

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"syscall"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/outside"
)

// restartMS is the median time in ms from the death of a stage's process, by SIGKILL, to the
// answer that its successor gives. The stage is one of program, which serves those of this
// module.
func restartMS(program string, repeats int) (float64, error) {
	program, err := filepath.Abs(program)
	if err != nil {
		return 0, err
	}
	s := outside.DefaultSettings()
	s.Name, s.Path, s.Args, s.RestartBudget = "region", program, []string{"region"}, 1000
	h, err := outside.Open(context.Background(), s, slog.New(slog.NewTextHandler(io.Discard, nil)))
	if err != nil {
		return 0, fmt.Errorf("%w (make build makes the program)", err)
	}
	defer h.Close()
	stage, _, err := h.Factory().New(nil, pipeline.Environment{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}})
	if err != nil {
		return 0, err
	}
	var took []float64
	for range repeats {
		pid, err := childRunning(program)
		if err != nil {
			return 0, err
		}
		start := time.Now()
		if err := syscall.Kill(pid, syscall.SIGKILL); err != nil {
			return 0, err
		}
		if err := answered(stage, start); err != nil {
			return 0, err
		}
		took = append(took, float64(time.Since(start).Microseconds())/1000)
	}
	slices.Sort(took)
	return took[len(took)/2], nil
}

// answered runs the stage until it gives an answer: the unit under way at the death is held.
func answered(stage pipeline.Stage, since time.Time) error {
	raw := raster.NewRaw(raster.Mono8, 64, 64)
	for {
		err := stage.Run(context.Background(), &pipeline.Item{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}, Frames: []pipeline.Frame{{Raw: raw}}})
		if err == nil || time.Since(since) > time.Minute {
			return err
		}
	}
}

// childRunning returns the process that runs a program below this one.
func childRunning(program string) (int, error) {
	links, _ := filepath.Glob("/proc/[0-9]*/exe")
	for _, l := range links {
		pid, err := strconv.Atoi(filepath.Base(filepath.Dir(l)))
		if to, linkErr := os.Readlink(l); err == nil && linkErr == nil && to == program && parentOf(pid) == os.Getpid() {
			return pid, nil
		}
	}
	return 0, fmt.Errorf("no process below this one runs %s", program)
}

// parentOf reads the fourth field of a process's stat, after the name in brackets.
func parentOf(pid int) int {
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	if err != nil {
		return 0
	}
	var state string
	var parent int
	after := string(text[slices.Index(text, ')')+1:])
	_, _ = fmt.Sscan(after, &state, &parent)
	return parent
}
