package main

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"time"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/cv"
	"lapgate/pipeline/raster/fused"
	"lapgate/proto/inspectpb"
)

const (
	sceneDefects   = 100 // at least that many of the scene's 160 must be in a verdict
	pipelinedRun   = 8   // frames in one go, sent or through the pass alone
	pipelinedAhead = 3   // of them under way at once
)

// benchVerdicts sends frames to the real server program over a loopback socket: from the
// first byte sent to the verdict, once the ledger has it. The large ones are pipelined, in
// turns with the fused pass alone, as many frames one after the other, and the tuned OpenCV
// chain alone, each on one thread: the best of at least ten of each.
func benchVerdicts(o options) (map[string]figure, error) {
	s, err := startServer(o)
	defer s.stop()
	if err != nil {
		return nil, err
	}
	out, err := s.large(o)
	if err != nil {
		return nil, err
	}
	took, err := s.small(o)
	if err != nil {
		return nil, err
	}
	unit := fmt.Sprintf("ms, first byte sent to verdict received, %d units of one 640 × 480 Mono8 view one at a time, ledger on, reports asked for", len(took))
	for name, p := range map[string]float64{"p50": 50, "p99": 99, "max": 100} {
		out["verdict_latency_ms_"+name] = figure{percentile(took, p), unit}
	}
	return out, nil
}

func (s *benchedServer) large(o options) (map[string]figure, error) {
	scene := o.scene()
	line, err := s.line("large")
	if err != nil {
		return nil, err
	}
	pass, err := prepare(scene.raw, fused.Planes{Dark: scene.dark, Response: scene.calibration().Response, Bad: scene.bad})
	if err != nil {
		return nil, err
	}
	chain, err := cv.NewTunedChain(scene.dark, scene.gain, scene.bad, 3.5, 6)
	if err != nil {
		return nil, err
	}
	defer chain.Close()
	cv.SetThreads(1)
	shots := []shot{shotOf(scene.raw), shotOf(scene.frame(13))} // not twice the same: that raises an alarm of dirt on the lens
	var alone, opencv, trip, stream best
	jobs := []struct {
		of  *best
		run func() error
	}{
		{&alone, inTurn(pipelinedRun, pass.run(3.5, 1))},
		{&opencv, func() error { _, err := chain.Run(scene.raw); return err }},
		{&trip, func() error { _, err := line.show(sceneDefects, shots...); return err }},
		{&stream, func() error {
			_, err := line.pipelined(pipelinedRun, pipelinedAhead, sceneDefects, shots...)
			return err
		}},
	}
	for range o.rounds(20) {
		for _, j := range jobs {
			if err := j.of.time(j.run); err != nil {
				return nil, err
			}
		}
	}
	stream.d /= pipelinedRun
	alone.d /= pipelinedRun
	return map[string]figure{"grpc_roundtrip_ms_12mp": trip.ms(), "grpc_to_verdict_ms_12mp": stream.ms(),
		"grpc_to_verdict_over_fused": {stream.d.Seconds() / alone.d.Seconds(), ""}, "grpc_to_verdict_vs_opencv_tuned": {opencv.d.Seconds() / stream.d.Seconds(), ""}}, nil
}

// small shows small units one after the other while reports are asked for, and returns what
// each took, in ms.
func (s *benchedServer) small(o options) ([]float64, error) {
	line, err := s.line("small")
	if err != nil {
		return nil, err
	}
	ctx, stop := context.WithCancel(context.Background())
	reports := make(chan error, 1)
	go func() { reports <- s.askReports(ctx) }()
	rng := rand.New(rand.NewPCG(5, 5))
	var took []float64
	for range o.units() {
		raw := raster.NewRaw(raster.Mono8, 640, 480)
		for k := range raw.Data {
			raw.Data[k] = byte(20 + 1.6*rng.NormFloat64())
		}
		d, err := line.show(0, shotOf(raw))
		if err != nil {
			stop()
			return nil, err
		}
		took = append(took, float64(d.Microseconds())/1000)
	}
	stop()
	return took, <-reports
}

// askReports asks for what a dashboard shows, ten times a second, until ctx ends.
func (s *benchedServer) askReports(ctx context.Context) error {
	y := inspectpb.NewYieldServiceClient(s.conn)
	for ctx.Err() == nil {
		f := &inspectpb.Filter{Part: "small"}
		_, err := y.GetSummary(ctx, &inspectpb.GetSummaryRequest{Filter: f})
		if err == nil {
			_, err = y.GetPareto(ctx, &inspectpb.GetParetoRequest{Filter: f})
		}
		if err == nil {
			_, err = y.GetLatency(ctx, &inspectpb.GetLatencyRequest{Filter: f})
		}
		if err != nil && ctx.Err() == nil {
			return fmt.Errorf("reports: %w", err)
		}
		select {
		case <-ctx.Done():
		case <-time.After(100 * time.Millisecond):
		}
	}
	return nil
}

// units is over how many units latencies are taken.
func (o options) units() int {
	if o.short {
		return 300
	}
	return 2000
}

// percentile is the smallest value that p per cent of the values do not exceed.
func percentile(values []float64, p float64) float64 {
	sorted := slices.Sorted(slices.Values(values))
	i := int(p/100*float64(len(sorted))+0.999999) - 1
	return sorted[min(max(i, 0), len(sorted)-1)]
}
