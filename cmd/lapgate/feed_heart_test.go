package main

import (
	"context"
	"log/slog"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/proto/inspectpb"
)

// pulse is a server that counts heartbeats and answers what it is told to.
type pulse struct {
	inspectpb.UnimplementedInspectionServiceServer
	mu      sync.Mutex // guards everything below
	beats   map[string]int
	because []string
	code    codes.Code
}

func (p *pulse) Heartbeat(_ context.Context, r *inspectpb.HeartbeatRequest) (*inspectpb.HeartbeatResponse, error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.beats[r.Line+"/"+r.Station]++
	if p.code != codes.OK {
		return nil, status.Error(p.code, "no")
	}
	return &inspectpb.HeartbeatResponse{Because: p.because}, nil
}

func (p *pulse) with(change func()) {
	p.mu.Lock()
	defer p.mu.Unlock()
	change()
}

func (p *pulse) of(place string) (n int) {
	p.with(func() { n = p.beats[place] })
	return n
}

// lines is a log that another goroutine writes.
type lines struct {
	mu   sync.Mutex
	text strings.Builder
}

func (l *lines) Write(b []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.text.Write(b)
}

func (l *lines) has(what string) bool {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Contains(l.text.String(), what)
}

func newPulse(t *testing.T) (*pulse, inspectpb.InspectionServiceClient) {
	p := &pulse{beats: map[string]int{}}
	conn, err := connect("unix://" + serveOn(t, func(s *grpc.Server) { inspectpb.RegisterInspectionServiceServer(s, p) }))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	return p, inspectpb.NewInspectionServiceClient(conn)
}

func TestHeartBeatsForEveryStation(t *testing.T) {
	p, client := newPulse(t)
	var log lines
	h := startHeart(t.Context(), client, 10*time.Millisecond, slog.New(slog.NewTextHandler(&log, nil)))
	h.add("A", "A1")
	h.add("A", "A2")
	h.add("A", "A1")
	h.add("A", "") // says nothing
	eventually(t, "both stations are told of", func() bool { return p.of("A/A1") > 2 && p.of("A/A2") > 2 })
	p.with(func() { p.because = []string{"master failed: master M-DIG failed at noon"} })
	eventually(t, "the log says why it holds", func() bool { return log.has("the station holds its units") && log.has("M-DIG failed") })
	p.with(func() { p.code = codes.Unavailable })
	n := p.of("A/A1")
	eventually(t, "it beats on through failures", func() bool { return p.of("A/A1") > n+1 })
	p.with(func() { p.code, p.because = codes.OK, nil })
	eventually(t, "the log says that it judges again", func() bool { return log.has("the station judges again") })
	p.with(func() {
		if len(p.beats) != 2 {
			t.Errorf("beats %v, want two stations", p.beats)
		}
		p.code = codes.Unimplemented
	})
	time.Sleep(100 * time.Millisecond)
	n = p.of("A/A2")
	time.Sleep(100 * time.Millisecond)
	if p.of("A/A2") != n {
		t.Error("it beats on for a server that knows no heartbeat")
	}
	startHeart(t.Context(), client, 0, nil).add("A", "A1") // none
}

// A feed beats for the stations of its frames, whether flags or names say them.
func TestFeedBeats(t *testing.T) {
	p, peer := &pulse{beats: map[string]int{}}, newPeer(t, "ring", "bar")
	peer.pulse = p
	peer.start()
	dir := unitsIn(t, 2)
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan int)
	go func() {
		done <- run(ctx, strings.Fields("feed --watch "+dir+" --server "+peer.address()+" --spool none --part mirror-25 --lot L1 --line A --station A1 --heartbeat 20ms --quiet"),
			nil, &lines{}, &lines{})
	}()
	eventually(t, "the feed beats", func() bool { return p.of("A/A1") > 1 })
	cancel()
	<-done
}
