package server_test

import (
	"context"
	"fmt"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
	"lapgate/server/images"
)

// memoryIsBack waits until the pixels of all frames are given back.
func (r *rig) memoryIsBack() {
	r.t.Helper()
	for range 400 {
		if r.intake.BytesInFlight() == 0 {
			return
		}
		time.Sleep(5 * time.Millisecond)
	}
	r.t.Errorf("%d bytes of frames are still held", r.intake.BytesInFlight())
}

func openImages(t *testing.T) *images.Store {
	t.Helper()
	s, err := images.Open(t.TempDir(), images.Settings{Policy: images.KeepAll})
	must(t, err)
	t.Cleanup(func() { s.Close() })
	return s
}

// However a unit ends, the memory of its frames goes back.
func TestFramesGiveTheirMemoryBack(t *testing.T) {
	for name, store := range map[string]*images.Store{"no frames kept": nil, "all frames kept": openImages(t)} {
		r := newRig(t, rigOptions{images: store})
		raw := frame(1, 0)
		for end, show := range map[string]func(l *line, unit string){
			"accepted":   func(l *line, unit string) { l.showUnit(unit, 1, 0) },
			"rejected":   func(l *line, unit string) { l.showUnit(unit, 2, 12) },
			"resent":     func(l *line, unit string) { l.showUnit(unit, 3, 0); l.showUnit(unit, 3, 0) },
			"incomplete": func(l *line, unit string) { l.show(header(unit, "ring", raw), raw) },
			"wrong checksum": func(l *line, unit string) {
				h := header(unit, "ring", raw)
				h.CRC32C++
				l.show(h, raw)
				l.show(header(unit, "bar", raw), raw)
			},
			"too many bytes": func(l *line, unit string) {
				n := l.start(header(unit, "ring", raw))
				l.chunk(n, 0, raw.Data)
				n = l.start(header(unit, "bar", raw))
				l.chunk(n, 0, append(raw.Data, 1))
			},
			"gap": func(l *line, unit string) {
				n := l.start(header(unit, "ring", raw))
				l.chunk(n, 0, raw.Data[:100])
				l.chunk(n, 200, raw.Data[200:])
				l.chunk(n, 100, raw.Data[100:200])
			},
			"late": func(l *line, unit string) {
				h := header(unit, "ring", raw)
				h.Spooled = true
				l.show(h, raw)
				l.show(header(unit, "bar", raw), raw)
			},
			"stage failed": func(l *line, unit string) { // frames smaller than a cell of the grid
				tiny := raster.NewRaw(raster.Mono8, 4, 4)
				l.show(header(unit, "ring", tiny), tiny)
				l.show(header(unit, "bar", tiny), tiny)
			},
			"view twice": func(l *line, unit string) {
				other := frame(9, 0)
				l.show(header(unit, "ring", raw), raw)
				l.show(header(unit, "ring", other), other)
				l.show(header(unit, "bar", raw), raw)
			},
			"no recipe": func(l *line, unit string) {
				h := header(unit, "ring", raw)
				h.Part = "other"
				l.show(h, raw)
			},
		} {
			t.Run(name+"/"+end, func(t *testing.T) {
				r.t = t
				l := r.line()
				show(l, "u"+fmt.Sprint(r.shown))
				r.shown++
				l.finish()
				if len(l.verdicts)+len(l.refused) == 0 {
					t.Error("no answer")
				}
				r.memoryIsBack()
			})
		}
	}
}

// A client that goes away within a frame, and one that goes away before the verdict.
func TestCancelledStreamGivesMemoryBack(t *testing.T) {
	r := newRig(t, rigOptions{})
	raw := frame(1, 0)
	ctx, cancel := context.WithCancel(context.Background())
	stream, err := r.Inspect(ctx)
	must(t, err)
	l := &line{t: t, stream: stream}
	l.chunk(l.start(header("u1", "ring", raw)), 0, raw.Data)
	l.chunk(l.start(header("u1", "bar", raw)), 0, raw.Data[:500])
	for r.intake.BytesInFlight() < 2*int64(len(raw.Data)) {
		time.Sleep(time.Millisecond)
	}
	cancel()
	r.memoryIsBack()
}

// In one call all frames of a unit come in one message, with and without the codec that
// leaves the pixels where they lie.
func TestUnitInOneCallGivesMemoryBack(t *testing.T) {
	r := newRig(t, rigOptions{images: openImages(t)})
	for i, options := range [][]grpc.CallOption{nil, {grpc.ForceCodecV2(inspectpb.Codec{})}} {
		unit := fmt.Sprintf("u%d", i)
		req := &inspectpb.InspectUnitRequest{}
		for k, view := range []string{"ring", "bar"} {
			raw := frame(uint64(10*i+k), 0)
			req.Frames = append(req.Frames, &inspectpb.Frame{Header: inspectpb.FromFrameHeader(header(unit, view, raw)), Data: raw.Data})
		}
		resp, err := r.InspectUnit(context.Background(), req, options...)
		must(t, err)
		if v := resp.Verdict.Judgement.Verdict; v != inspectpb.Verdict_VERDICT_ACCEPT {
			t.Errorf("verdict %v", v)
		}
		req.Frames[1].Data = req.Frames[1].Data[:100]
		req.Frames[0].Header.Identity.Unit, req.Frames[1].Header.Identity.Unit = unit+"short", unit+"short"
		resp, err = r.InspectUnit(context.Background(), req, options...)
		must(t, err)
		if v := resp.Verdict.Judgement.Verdict; v != inspectpb.Verdict_VERDICT_HOLD {
			t.Errorf("a frame cut short: verdict %v", v)
		}
	}
	r.memoryIsBack()
}

// showUntilTaken shows a unit again while there is no room for it.
func (r *rig) showUntilTaken(unit string, seed uint64, diameter float64) {
	for {
		l := r.line()
		l.showUnit(unit, seed, diameter)
		l.finish()
		if l.verdicts[unit] != nil {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
}

// Frames of several units in one call would have one answer for all: they are refused, and
// no worker waits for somebody to take the others.
func TestUnitInOneCallIsOneUnit(t *testing.T) {
	r := newRig(t, rigOptions{workers: 2})
	req := &inspectpb.InspectUnitRequest{}
	for i := range 5 {
		for _, view := range []string{"ring", "bar"} {
			raw := frame(uint64(i), 0)
			req.Frames = append(req.Frames, &inspectpb.Frame{Header: inspectpb.FromFrameHeader(header(fmt.Sprintf("m%d", i), view, raw)), Data: raw.Data})
		}
	}
	_, err := r.InspectUnit(context.Background(), req)
	if status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "one showing") {
		t.Errorf("error %v, want one that says so", err)
	}
	r.memoryIsBack()
	req.Frames = req.Frames[:2]
	if _, err := r.InspectUnit(context.Background(), req); err != nil {
		t.Error(err)
	}
}

// Many units through memory for a few: what the image store writes, after the verdict,
// are each unit's own pixels.
func TestMemoryUsedAgainKeepsFramesApart(t *testing.T) {
	store := openImages(t)
	r := newRig(t, rigOptions{images: store, maxBytes: 12 * side * side})
	var lines sync.WaitGroup
	for n := range 3 {
		lines.Go(func() {
			for i := range 8 {
				r.showUntilTaken(fmt.Sprintf("u%d-%d", n, i), uint64(100*n+i), float64(i))
			}
		})
	}
	lines.Wait()
	must(t, store.Close())
	r.memoryIsBack()
	kept := 0
	for n := range 3 {
		for i := range 8 {
			story, err := r.ledger.Unit(context.Background(), "disc", fmt.Sprintf("u%d-%d", n, i))
			must(t, err)
			for _, v := range story[0].Evidence.Views {
				f := v.Frames[0]
				got, err := store.Find(f.Stored)
				must(t, err)
				if pipeline.Checksum(got.Data) != f.Header.CRC32C {
					t.Errorf("unit %s view %s: other pixels than were sent", f.Header.Unit, v.Name)
				}
				kept++
			}
		}
	}
	if kept < 36 { // a unit whose second view found no room is held with one frame
		t.Errorf("%d frames of 48 kept, too few to say", kept)
	}
}
