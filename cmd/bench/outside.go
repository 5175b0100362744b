package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/outside"
)

// serveWord as first argument makes this program the stage.
const serveWord = "serve-pixel-statistics"

// serveIfAsked makes this program the stage of the figures below, where its first
// argument says so.
func serveIfAsked() {
	if len(os.Args) == 2 && os.Args[1] == serveWord {
		outside.Serve(pixelStatistics())
	}
}

// statisticsSettings say how much of the frame is read.
type statisticsSettings struct {
	// Every is 1 for every pixel, n for every n-th; at least 1.
	Every int `json:"every"`
}

// Check implements pipeline.Checker.
func (s statisticsSettings) Check() error {
	if s.Every < 1 {
		return fmt.Errorf("every: got %d, want 1 or more", s.Every)
	}
	return nil
}

// pixelStatistics is a lean stage: what a call costs beside it shows as clearly as it can.
func pixelStatistics() pipeline.Factory {
	return pipeline.Make(pipeline.Factory{Type: "pixel_statistics", Version: "1", Scope: pipeline.ScopeView,
		Summary: "Measures mean and variance of all counts.", Reads: []string{pipeline.RawPlane}, Writes: []string{"measurements"}},
		statisticsSettings{Every: 1}, func(s statisticsSettings, _ pipeline.Environment) (pipeline.Stage, error) {
			return pipeline.StageFunc(func(_ context.Context, item *pipeline.Item) error {
				data := item.Frames[0].Raw.Data
				sum, squares, n := uint64(0), uint64(0), 0.0
				for i := 0; i < len(data); i += s.Every {
					b := uint64(data[i])
					sum, squares, n = sum+b, squares+b*b, n+1
				}
				mean := float64(sum) / n
				item.Measure("mean_dn", mean, "DN")
				item.Measure("variance_dn2", float64(squares)/n-mean*mean, "DN²")
				return nil
			}), nil
		})
}

// A frame of 12 megapixels.
const benchWidth, benchHeight = 4000, 3000

// sparse is how many pixels a stage skips whose calls are compared for their transport.
const sparse = 64

// benchOutside compares a stage inside with the same one outside, shared memory with
// bytes, and measures how long a unit waits for a process that takes another's place.
func benchOutside(o options) (map[string]figure, error) {
	repeats := 61
	if o.short {
		repeats = 15
	}
	inside, err := statistics(pixelStatistics(), 1)
	if err != nil {
		return nil, err
	}
	arena, err := outside.NewArena(benchWidth * benchHeight)
	if err != nil {
		return nil, err
	}
	defer arena.Close()
	sharedHost, err := hosted(false, arena)
	if err != nil {
		return nil, err
	}
	defer sharedHost.Close()
	bytesHost, err := hosted(true, nil)
	if err != nil {
		return nil, err
	}
	defer bytesHost.Close()
	stages := []pipeline.Stage{inside}
	for _, s := range []struct {
		host  *outside.Host
		every int
	}{{sharedHost, 1}, {sharedHost, sparse}, {bytesHost, sparse}} {
		stage, err := statistics(s.host.Factory(), s.every)
		if err != nil {
			return nil, err
		}
		stages = append(stages, stage)
	}
	raw := raster.Raw{Format: raster.Mono8, Width: benchWidth, Height: benchHeight, Stride: benchWidth, Data: arena.Allocate(benchWidth * benchHeight)}
	ms, err := bests(raw, repeats, stages...)
	if err != nil {
		return nil, err
	}
	restart, err := restartMS(filepath.Join(filepath.Dir(o.lapgated), "lapgate-stage"), repeats)
	return map[string]figure{
		"outside_inside_ms_12mp":        {ms[0], "ms"},
		"outside_call_ms_12mp":          {ms[1], "ms"},
		"outside_call_over_inside_12mp": {ms[1] / ms[0], "1"},
		"outside_shared_sparse_ms_12mp": {ms[2], "ms"},
		"outside_bytes_sparse_ms_12mp":  {ms[3], "ms"},
		"outside_bytes_over_shared":     {ms[3] / ms[2], "1"},
		"plugin_restart_ms":             {restart, "ms"},
	}, err
}

func statistics(f pipeline.Factory, every int) (pipeline.Stage, error) {
	text := fmt.Sprintf(`{"every": %d}`, every)
	stage, _, err := f.New(func(dst any) error { return json.Unmarshal([]byte(text), dst) }, pipeline.Environment{})
	return stage, err
}

func hosted(bytesOnly bool, frames *outside.Arena) (*outside.Host, error) {
	s := outside.DefaultSettings()
	self, err := os.Executable()
	if err != nil {
		return nil, err
	}
	s.Name, s.Path, s.Args, s.BytesOnly, s.RestartBudget, s.Frames = "pixel statistics", self, []string{serveWord}, bytesOnly, 1000, frames
	return outside.Open(context.Background(), s, slog.New(slog.NewTextHandler(io.Discard, nil)))
}

// bests runs the stages in turn, so that the machine's other work meets all alike, and
// returns the shortest time of each in ms.
func bests(raw raster.Raw, repeats int, stages ...pipeline.Stage) ([]float64, error) {
	for i := range raw.Data {
		raw.Data[i] = byte(i * 7 % 251)
	}
	out := make([]float64, len(stages))
	for r := range repeats {
		for i, s := range stages {
			item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}}
			start := time.Now()
			if err := s.Run(context.Background(), item); err != nil {
				return nil, err
			}
			ms := float64(time.Since(start).Microseconds()) / 1000
			if mean, ok := item.Number("mean_dn"); !ok || mean < 1 {
				return nil, fmt.Errorf("stage %d measured nothing", i)
			}
			if r == 0 || ms < out[i] {
				out[i] = ms
			}
		}
	}
	return out, nil
}
