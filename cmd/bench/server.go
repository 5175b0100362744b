package main

import (
	"context"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"lapgate/pipeline/calibrate"
	"lapgate/proto/inspectpb"
)

// largeRecipe judges the scene's frames as a line would: flat-field with dark, response
// and bad pixels, dark-field contrast, blobs, classes and limits, over the whole frame.
const largeRecipe = `format: 1
part: large
max_attempts: 0
min_coverage: 0.5
views:
  - {name: ring, proofs: none, stages: [{type: region}, {type: flatfield}, {type: darkfield}, {type: blobs}]}
unit: [{type: merge}, {type: classify}]
limits:
  - {name: dig too large, kind: dig, each: diameter_um, at_most: 1000000, unit: um}
  - {name: scratch too long, kind: scratch, each: length_um, at_most: 1000000, unit: um}
`

// smallRecipe judges a view of any size without calibration.
const smallRecipe = `format: 1
part: small
max_attempts: 0
min_coverage: 0.5
views:
  - {name: ring, proofs: none, calibration: none, um_per_px: 10, stages: [{type: region}, {type: flatfield}, {type: darkfield}, {type: blobs}]}
unit: [{type: merge}, {type: classify}]
limits:
  - {name: dig too large, each: diameter_um, at_most: 1000000, unit: um}
`

// benchedServer is the real server program with its ledger, on a loopback port.
type benchedServer struct {
	cmd  *exec.Cmd
	dir  string
	conn *grpc.ClientConn
}

func startServer(o options) (*benchedServer, error) {
	dir, err := os.MkdirTemp("", "lapgate-bench-")
	if err != nil {
		return nil, err
	}
	s := &benchedServer{dir: dir}
	if err := s.furnish(o.scene()); err != nil {
		return s, err
	}
	program, err := filepath.Abs(o.lapgated)
	if err != nil {
		return s, err
	}
	free, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return s, err
	}
	address := free.Addr().String()
	free.Close()
	s.cmd = exec.Command(program, "serve", "--listen", address, "--images", "", "--log-level", "error", "--development")
	s.cmd.Dir, s.cmd.Stderr = dir, os.Stderr
	if err := s.cmd.Start(); err != nil {
		return s, err
	}
	for range 400 {
		if c, err := net.Dial("tcp", address); err == nil {
			c.Close()
			return s, s.connect(address)
		}
		time.Sleep(50 * time.Millisecond)
	}
	return s, fmt.Errorf("%s does not listen", o.lapgated)
}

// furnish writes recipes and calibration.
func (s *benchedServer) furnish(scene *scene) error {
	if err := os.Mkdir(filepath.Join(s.dir, "recipes"), 0o755); err != nil {
		return err
	}
	for name, text := range map[string]string{"large.yaml": largeRecipe, "small.yaml": smallRecipe} {
		if err := os.WriteFile(filepath.Join(s.dir, "recipes", name), []byte(text), 0o644); err != nil {
			return err
		}
	}
	c := *scene.calibration()
	c.Hash = ""
	return calibrate.Write(filepath.Join(s.dir, "calibrations", "ring"), calibrate.Made{Calibration: &c})
}

// connect connects as the line's client does.
func (s *benchedServer) connect(address string) error {
	var err error
	s.conn, err = grpc.NewClient(address, grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithDefaultCallOptions(grpc.ForceCodecV2(inspectpb.Codec{})))
	return err
}

func (s *benchedServer) line(part string) (*benchLine, error) {
	stream, err := inspectpb.NewInspectionServiceClient(s.conn).Inspect(context.Background())
	return &benchLine{stream: stream, part: part}, err
}

func (s *benchedServer) stop() {
	if s.conn != nil {
		s.conn.Close()
	}
	if s.cmd != nil && s.cmd.Process != nil {
		_ = s.cmd.Process.Kill()
		_ = s.cmd.Wait()
	}
	_ = os.RemoveAll(s.dir)
}
