package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
)

// peer is a server in memory that keeps the contract: it puts frames together, checks
// their sum, judges a unit once its views are there, records before it answers, gives
// stored verdicts again, and refuses other frames under a used identity. What it has
// recorded outlives its listener, as a ledger does.
type peer struct {
	inspectpb.UnimplementedInspectionServiceServer
	t      *testing.T
	socket string
	views  []string
	pulse  *pulse // answers heartbeats; nil = knows none

	mu       sync.Mutex // guards everything below
	grpc     *grpc.Server
	judge    func(h pipeline.FrameHeader) pipeline.Judgement
	refuse   func(h pipeline.FrameHeader) error // before a frame is taken
	silent   bool                               // records, but breaks the stream instead of answering
	records  map[string]record                  // by showing
	order    []string                           // of recording, units
	headers  []pipeline.FrameHeader             // of all frames that came whole
	breaks   int
	chunkTop int
}

type record struct {
	id     string
	header pipeline.FrameHeader
	digest string
	j      pipeline.Judgement
}

func newPeer(t *testing.T, views ...string) *peer {
	dir, err := os.MkdirTemp("", "peer") // short: a socket's path may have 107 bytes
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	return &peer{t: t, socket: filepath.Join(dir, "s"), views: views, records: map[string]record{},
		judge:  func(pipeline.FrameHeader) pipeline.Judgement { return pipeline.Judgement{Verdict: pipeline.Accept} },
		refuse: func(pipeline.FrameHeader) error { return nil }}
}

func (p *peer) address() string { return "unix://" + p.socket }

func (p *peer) start() *peer {
	p.t.Helper()
	l, err := net.Listen("unix", p.socket)
	if err != nil {
		p.t.Fatal(err)
	}
	s := grpc.NewServer()
	inspectpb.RegisterInspectionServiceServer(s, p)
	p.mu.Lock()
	p.grpc = s
	p.mu.Unlock()
	go s.Serve(l) //nolint:errcheck // ends with stop
	p.t.Cleanup(s.Stop)
	return p
}

func (p *peer) stop() { p.grpc.Stop() }

// with changes the peer's behaviour while it runs.
func (p *peer) with(change func()) {
	p.mu.Lock()
	defer p.mu.Unlock()
	change()
}

func (p *peer) recorded() []string {
	p.mu.Lock()
	defer p.mu.Unlock()
	return slices.Clone(p.order)
}

// Heartbeat implements InspectionService.
func (p *peer) Heartbeat(ctx context.Context, r *inspectpb.HeartbeatRequest) (*inspectpb.HeartbeatResponse, error) {
	if p.pulse == nil {
		return p.UnimplementedInspectionServiceServer.Heartbeat(ctx, r)
	}
	return p.pulse.Heartbeat(ctx, r)
}

type peerStream struct {
	peer *peer
	grpc inspectpb.InspectionService_InspectServer
	open map[uint32]*partial
	full map[string]map[string][]pipeline.Frame // by showing, by view
}

type partial struct {
	header pipeline.FrameHeader
	data   []byte
}

func (p *peer) Inspect(g inspectpb.InspectionService_InspectServer) error {
	s := peerStream{p, g, map[uint32]*partial{}, map[string]map[string][]pipeline.Frame{}}
	for {
		r, err := g.Recv()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		if err := s.take(r); err != nil {
			return err
		}
	}
}

func (s *peerStream) take(r *inspectpb.InspectRequest) error {
	s.peer.mu.Lock()
	defer s.peer.mu.Unlock()
	if start := r.GetStart(); start != nil {
		h, err := inspectpb.ToFrameHeader(start.Header)
		if err == nil {
			err = s.peer.refuse(h)
		}
		if err != nil {
			return s.grpc.Send(&inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Refused{Refused: inspectpb.Refuse(start.Frame, start.Header, err)}})
		}
		s.open[start.Frame] = &partial{header: h}
		return nil
	}
	c := r.GetChunk()
	f := s.open[c.Frame]
	if f == nil {
		return nil // of a refused frame
	}
	if c.Offset != uint64(len(f.data)) {
		return fmt.Errorf("chunk at %d, want %d", c.Offset, len(f.data))
	}
	s.peer.chunkTop = max(s.peer.chunkTop, len(c.Data))
	f.data = append(f.data, c.Data...)
	if len(f.data) < f.header.PixelBytes() {
		return nil
	}
	delete(s.open, c.Frame)
	return s.whole(f)
}

func (s *peerStream) whole(f *partial) error {
	checked := f.header
	if checked.Unit == "" {
		checked.Unit = "given"
	}
	frame, err := pipeline.NewFrame(checked, f.data)
	if err != nil {
		return err
	}
	s.peer.headers = append(s.peer.headers, f.header)
	key := showingKey(f.header)
	if s.full[key] == nil {
		s.full[key] = map[string][]pipeline.Frame{}
	}
	s.full[key][f.header.View] = append(s.full[key][f.header.View], frame)
	var views []pipeline.View
	for _, name := range s.peer.views {
		frames := s.full[key][name]
		if len(frames) == 0 || len(frames) < frames[0].Header.Count {
			return nil
		}
		views = append(views, pipeline.View{Name: name, Frames: frames})
	}
	delete(s.full, key)
	return s.answer(key, f.header, pipeline.Digest(views))
}

func (s *peerStream) answer(key string, h pipeline.FrameHeader, digest string) error {
	p := s.peer
	r, stored := p.records[key]
	if stored && r.digest != digest {
		why := pipeline.Fail(pipeline.Conflict, "identity conflict: unit %s was judged with other frames", h.Unit)
		return s.grpc.Send(&inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Refused{Refused: inspectpb.Refuse(0, inspectpb.FromFrameHeader(h), why)}})
	}
	if !stored {
		r = record{strconv.Itoa(len(p.records) + 1), h, digest, p.judge(h)}
		if h.Spooled {
			r.j = pipeline.Judgement{Verdict: pipeline.Hold, Reasons: []pipeline.Reason{{Name: pipeline.ReasonLate, Verdict: pipeline.Hold}}}
		}
		p.records[key] = r
		p.order = append(p.order, h.Unit)
	}
	if p.silent {
		p.breaks++
		return errors.New("the line was cut before the answer")
	}
	id := r.header.Identity
	if id.Unit == "" {
		id.Unit = "G" + r.id
	}
	return s.grpc.Send(&inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Verdict{Verdict: &inspectpb.UnitVerdict{
		Identity: inspectpb.FromIdentity(id), InspectionId: r.id, Judgement: inspectpb.FromJudgement(r.j),
		Stored: stored, RequestId: r.header.RequestID, Coverage: 1}}})
}

// serveOn serves on a socket of its own until the test ends.
func serveOn(t *testing.T, register func(*grpc.Server)) string {
	t.Helper()
	dir, err := os.MkdirTemp("", "peer") // short: a socket's path may have 107 bytes
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	l, err := net.Listen("unix", filepath.Join(dir, "s"))
	if err != nil {
		t.Fatal(err)
	}
	s := grpc.NewServer()
	register(s)
	go s.Serve(l) //nolint:errcheck // ends with Stop
	t.Cleanup(s.Stop)
	return filepath.Join(dir, "s")
}

// writePGM writes a picture of its own for each seed.
func writePGM(t *testing.T, path string, width, height int, seed byte) {
	t.Helper()
	raw := raster.NewRaw(raster.Mono8, width, height)
	for i := range raw.Data {
		raw.Data[i] = byte(i)*7 + seed
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	text := append(fmt.Appendf(nil, "P5\n%d %d\n255\n", width, height), raw.Data...)
	if err := os.WriteFile(path+".tmp", text, 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.Rename(path+".tmp", path); err != nil {
		t.Fatal(err)
	}
}

// unitsIn writes a ring and a bar picture for each of n units and returns the folder.
func unitsIn(t *testing.T, n int) string {
	t.Helper()
	dir := t.TempDir()
	for i := 1; i <= n; i++ {
		for j, view := range []string{"bar", "ring"} {
			writePGM(t, filepath.Join(dir, fmt.Sprintf("U%03d_%s.pgm", i, view)), 8, 4, byte(2*i+j))
		}
	}
	return dir
}

// eventually waits for something that happens in another goroutine or process.
func eventually(t *testing.T, what string, is func() bool) {
	t.Helper()
	for range 1000 {
		if is() {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	t.Fatalf("did not happen within 10 s: %s", what)
}
