package main

import (
	"context"
	"fmt"
	"math/rand/v2"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
)

// serverRecipe judges one view of any size without calibration.
const serverRecipe = `format: 1
part: bench
max_attempts: 0
min_coverage: 0.5
views:
  - {name: ring, proofs: none, calibration: none, um_per_px: 10, stages: [{type: region}, {type: flatfield}, {type: darkfield}, {type: blobs}]}
limits:
  - {name: dig too large, each: diameter_um, at_most: 1000000, unit: um}
`

// latencyUnits is over how many units the latency percentiles are taken.
const latencyUnits = 500

// benchServer runs the real server program with its ledger and sends it frames over a
// real socket: one of 12 megapixels at a time, and a line of small ones.
func benchServer(o options) (map[string]figure, error) {
	s, err := startServer(o)
	if err != nil {
		return nil, err
	}
	defer s.stop()
	out := map[string]figure{}
	whole := newScene()
	trip := best{}
	for i := range repeats(o, 6) {
		if err := trip.time(func() error { _, err := s.show(fmt.Sprintf("large%d", i), whole.raw); return err }); err != nil {
			return nil, err
		}
	}
	out["grpc_roundtrip_ms_12mp"] = trip.ms()
	took, err := s.line(latencyUnits)
	if err != nil {
		return nil, err
	}
	unit := fmt.Sprintf("ms, first byte sent to verdict received, %d units of one 640 × 480 Mono8 view, ledger on, one at a time", latencyUnits)
	out["verdict_latency_ms_p50"] = figure{percentile(took, 50), unit}
	out["verdict_latency_ms_p99"] = figure{percentile(took, 99), unit}
	out["verdict_latency_ms_max"] = figure{percentile(took, 100), unit}
	return out, nil
}

type benchedServer struct {
	cmd    *exec.Cmd
	dir    string
	conn   *grpc.ClientConn
	stream grpc.BidiStreamingClient[inspectpb.InspectRequest, inspectpb.InspectResponse]
	number uint32
}

func startServer(o options) (*benchedServer, error) {
	dir, err := os.MkdirTemp("", "lapgate-bench-")
	if err != nil {
		return nil, err
	}
	s := &benchedServer{dir: dir}
	if err := os.Mkdir(filepath.Join(dir, "recipes"), 0o755); err != nil {
		return nil, err
	}
	if err := os.WriteFile(filepath.Join(dir, "recipes", "bench.yaml"), []byte(serverRecipe), 0o644); err != nil {
		return nil, err
	}
	program, err := filepath.Abs(o.lapgated)
	if err != nil {
		return nil, err
	}
	free, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return nil, err
	}
	address := free.Addr().String()
	free.Close()
	s.cmd = exec.Command(program, "serve", "--listen", address, "--images", "", "--log-level", "warn", "--development")
	s.cmd.Dir, s.cmd.Stderr = dir, os.Stderr
	if err := s.cmd.Start(); err != nil {
		return nil, err
	}
	for range 200 {
		if c, err := net.Dial("tcp", address); err == nil {
			c.Close()
			return s, s.connect(address)
		}
		time.Sleep(50 * time.Millisecond)
	}
	return s, fmt.Errorf("%s does not listen", o.lapgated)
}

func (s *benchedServer) connect(address string) error {
	var err error
	if s.conn, err = grpc.NewClient(address, grpc.WithTransportCredentials(insecure.NewCredentials())); err != nil {
		return err
	}
	s.stream, err = inspectpb.NewInspectionServiceClient(s.conn).Inspect(context.Background())
	return err
}

func (s *benchedServer) stop() {
	if s.conn != nil {
		s.conn.Close()
	}
	_ = s.cmd.Process.Kill()
	_ = s.cmd.Wait()
	_ = os.RemoveAll(s.dir)
}

// chunkBytes keeps a chunk's message below 1 MiB.
const chunkBytes = 1_000_000

// show sends one frame and waits for its verdict.
func (s *benchedServer) show(unit string, raw raster.Raw) (time.Duration, error) {
	h := pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "bench", Unit: unit, Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Setup},
		Capture:  pipeline.Capture{Format: raw.Format, Width: raw.Width, Height: raw.Height}, View: "ring", Count: 1, Stride: raw.Stride,
		Captured: time.Now(), CRC32C: pipeline.Checksum(raw.Data)}
	s.number++
	start := time.Now()
	err := s.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Start{Start: &inspectpb.FrameStart{Frame: s.number, Header: inspectpb.FromFrameHeader(h)}}})
	for at := 0; at < len(raw.Data) && err == nil; at += chunkBytes {
		err = s.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Chunk{Chunk: &inspectpb.FrameChunk{
			Frame: s.number, Offset: uint64(at), Data: raw.Data[at:min(at+chunkBytes, len(raw.Data))]}}})
	}
	if err != nil {
		return 0, err
	}
	resp, err := s.stream.Recv()
	if err != nil {
		return 0, fmt.Errorf("%w: %w", errNoVerdict, err)
	}
	if resp.GetVerdict() == nil {
		return 0, fmt.Errorf("frame refused: %s", resp.GetRefused().GetMessage())
	}
	return time.Since(start), nil
}

// line shows n small units one after the other and returns what each took, in ms.
func (s *benchedServer) line(n int) ([]float64, error) {
	rng := rand.New(rand.NewPCG(5, 5))
	var took []float64
	for i := range n {
		raw := raster.NewRaw(raster.Mono8, 640, 480)
		for k := range raw.Data {
			raw.Data[k] = byte(20 + 1.6*rng.NormFloat64())
		}
		d, err := s.show(fmt.Sprintf("unit%d", i), raw)
		if err != nil {
			return nil, err
		}
		took = append(took, float64(d.Microseconds())/1000)
	}
	return took, nil
}

// percentile is the smallest value that p per cent of the values do not exceed.
func percentile(values []float64, p float64) float64 {
	sorted := slices.Sorted(slices.Values(values))
	i := int(p/100*float64(len(sorted))+0.999999) - 1
	return sorted[min(max(i, 0), len(sorted)-1)]
}
