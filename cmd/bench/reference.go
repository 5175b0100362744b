package main

import (
	"context"
	"fmt"
	"time"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster/cv"
	"lapgate/plugins/builtin"
)

// chainRecipe is the whole frame through the stages that a fused pass replaces.
const chainRecipe = `format: 1
part: bench
min_coverage: 0.5
views:
  - {name: ring, proofs: none, stages: [{type: region}, {type: flatfield}, {type: darkfield}, {type: blobs}]}
limits:
  - {name: dig too large, each: diameter_um, at_most: 1000000, unit: um}
`

// benchReference measures the readable reference and the tuned OpenCV chain on the same
// frame, in turns, one thread each: the best of each.
func benchReference(o options) (map[string]figure, error) {
	s := *o.scene()
	p, err := buildChain(s)
	if err != nil {
		return nil, err
	}
	defer p.Close()
	cv.SetThreads(1)
	chain, err := cv.NewTunedChain(s.dark, s.gain, s.bad, 3.5, 6)
	if err != nil {
		return nil, err
	}
	defer chain.Close()
	view := pipeline.View{Name: "ring", Frames: []pipeline.Frame{{Header: benchHeader(s), Raw: s.raw}}}
	reference, opencv := best{}, best{}
	for i := range repeats(o, 10) {
		if err := opencv.time(func() error { _, err := chain.Run(s.raw); return err }); err != nil {
			return nil, err
		}
		if i%3 != 0 { // the reference takes seconds
			continue
		}
		err := reference.time(func() error {
			if r := p.RunView(context.Background(), view.Frames[0].Header.Identity, view); r.Failure != nil {
				return fmt.Errorf("stage %s: %s", r.Failure.Stage, r.Failure.Detail)
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return map[string]figure{"reference_ms_12mp": reference.ms(), "opencv_tuned_ms_12mp": opencv.ms()}, nil
}

func buildChain(s scene) (*pipeline.Pipeline, error) {
	cat, err := builtin.Catalogue()
	if err != nil {
		return nil, err
	}
	recipe, err := configs.DecodeRecipe("bench.yaml", []byte(chainRecipe), cat)
	if err != nil {
		return nil, err
	}
	return pipeline.Build(recipe, cat, pipeline.Options{Calibrations: map[string]*pipeline.Calibration{"ring": s.calibration()}, Unfused: true})
}

func benchHeader(s scene) pipeline.FrameHeader {
	return pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "bench", Unit: "u", Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Setup},
		Capture:  s.calibration().Capture, View: "ring", Count: 1, Stride: s.raw.Stride, Captured: time.Now(), CRC32C: pipeline.Checksum(s.raw.Data)}
}

func repeats(o options, n int) int {
	if o.short {
		return max(n/3, 2)
	}
	return n
}

// best keeps the shortest of several runs.
type best struct{ d time.Duration }

func (b *best) time(f func() error) error {
	start := time.Now()
	if err := f(); err != nil {
		return err
	}
	if d := time.Since(start); b.d == 0 || d < b.d {
		b.d = d
	}
	return nil
}

func (b best) ms() figure { return figure{float64(b.d.Microseconds()) / 1000, "ms"} }
