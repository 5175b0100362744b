package server_test

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math/rand/v2"
	"net"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/builtin"
	"lapgate/proto/inspectpb"
	"lapgate/server"
	"lapgate/server/alarm"
	"lapgate/server/images"
	"lapgate/server/intake"
	"lapgate/server/ledger"
	"lapgate/server/masters"
	"lapgate/server/retest"
)

// recipeText judges two views of 96 × 96 px by the real stages.
const recipeText = `format: 1
part: disc
max_attempts: 3
min_coverage: 0.9
view_timeout_ms: 400
views:
  - {name: ring, calibration: none, proofs: none, um_per_px: 10, stages: [{type: region}, {type: flatfield}, {type: darkfield, grid_px: 32}, {type: blobs}]}
  - {name: bar, calibration: none, proofs: none, um_per_px: 10, stages: [{type: region}, {type: flatfield}, {type: darkfield, grid_px: 32}, {type: blobs}]}
unit: [{type: merge}, {type: classify}]
limits:
  - {name: dig too large, each: diameter_um, at_most: 60, unit: um}
`

const side = 96 // px of a test frame

// rig is a real server on a real socket with a real ledger file.
type rig struct {
	t      *testing.T
	ledger *ledger.Store
	intake *intake.Intake
	book   *server.Book
	inspectpb.InspectionServiceClient
	yield   inspectpb.YieldServiceClient
	recipes inspectpb.RecipeServiceClient
	volume  inspectpb.VolumeServiceClient
	masters inspectpb.MasterServiceClient
	clock   *clock
	dsn     string
	shown   int // showings, for frames that differ
	round   int // of masters
	decode  server.Decode
}

// rigOptions change what a test is about; zero values are roomy.
type rigOptions struct {
	maxBytes int64
	workers  int
	dsn      string
	recipe   string // text; empty = recipeText
	approval bool   // only approved recipes judge
	people   []configs.Person
	clock    *clock // nil = the real one
	alarms   alarm.Settings
	// calibrations by view; nil = the recipe needs none
	calibrations map[string]*pipeline.Calibration
	images       *images.Store
}

func (o rigOptions) keep() func(pipeline.Verdict, []pipeline.Frame, func()) []string {
	if o.images == nil {
		return nil
	}
	return o.images.Offer
}

// clock is a time that a test moves.
type clock struct {
	mu sync.Mutex
	at time.Time
}

func (c *clock) now() time.Time {
	if c == nil {
		return time.Now()
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	c.at = c.at.Add(time.Millisecond)
	return c.at
}

func (c *clock) advance(d time.Duration) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.at = c.at.Add(d)
}

func newRig(t *testing.T, o rigOptions) *rig {
	t.Helper()
	if o.maxBytes == 0 {
		o.maxBytes = 64 << 20
	}
	if o.dsn == "" {
		o.dsn = filepath.Join(t.TempDir(), "ledger.db")
	}
	if o.recipe == "" {
		o.recipe = recipeText
	}
	r := &rig{t: t, clock: o.clock, dsn: o.dsn}
	cat, err := builtin.Catalogue()
	must(t, err)
	r.decode = func(file string, text []byte) (*pipeline.Recipe, error) { return configs.DecodeRecipe(file, text, cat) }
	r.ledger, err = ledger.Open(context.Background(), o.dsn)
	must(t, err)
	r.ledger.Now = o.clock.now
	r.book = server.NewBook(func(rec *pipeline.Recipe, line, station string) (*pipeline.Pipeline, func() bool, error) {
		p, err := pipeline.Build(rec, cat, pipeline.Options{ProgramVersion: "test", Calibrations: o.calibrations,
			Earlier: func(view string, most int) ([]pipeline.FrameHeader, error) {
				return r.ledger.FramesBefore(context.Background(), line, station, view, most)
			}})
		return p, func() bool { return false }, err
	})
	if o.approval {
		r.book.RequireApproval(r.ledger, r.decode, o.clock.now)
	}
	r.save(o.recipe)
	r.serve(o)
	return r
}

// save is what the server does when a recipe is saved; it returns the text's hash.
func (r *rig) save(text string) string {
	r.t.Helper()
	recipe, err := r.decode("disc.yaml", []byte(text))
	must(r.t, err)
	must(r.t, r.ledger.PutRecipe(context.Background(), ledger.Recipe{Hash: recipe.TextHash, Part: recipe.Part, File: recipe.File, Text: text}))
	must(r.t, r.book.Put("disc.yaml", recipe, r.clock.now()))
	return recipe.TextHash
}

// serve starts intake and services.
func (r *rig) serve(o rigOptions) {
	t, feed, stations := r.t, server.NewFeed(), server.NewStations()
	gate := &masters.Gate{Ledger: r.ledger, Started: o.clock.now(), Now: o.clock.now, Log: quiet()}
	watch := &alarm.Watch{Ledger: r.ledger, Inner: gate, Now: o.clock.now, Log: quiet(), Settings: o.alarms}
	again := &retest.Keeper{Ledger: r.ledger, Decode: r.decode, Log: quiet()}
	var err error
	r.intake, err = intake.New(intake.Settings{MaxBytesInFlight: o.maxBytes, MaxFrameBytes: 1 << 20, Workers: max(o.workers, 2),
		ViewTimeout: time.Second, Now: o.clock.now, Log: quiet(), Gate: watch,
		Keep: o.keep(), Recorded: func(v intake.Verdict) {
			watch.Recorded(v.Inspection)
			feed.Send(v)
			stations.Inspected(v)
			again.Recorded(v.Inspection)
		}}, r.book, r.ledger)
	must(t, err)
	g, _ := server.NewGRPC(server.Deps{Intake: r.intake, Ledger: r.ledger, Book: r.book, Feed: feed, Log: quiet(), Now: o.clock.now,
		Check: func(file string, text []byte) error { _, err := r.decode(file, text); return err },
		Gate:  gate, Stations: stations, People: server.People{List: o.people}, Retest: again, Alarms: watch},
		server.GRPCOptions{MaxMessageBytes: 16 << 20, MaxStreams: 64, Reflection: true})
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	go g.Serve(l)
	conn, err := grpc.NewClient(l.Addr().String(), grpc.WithTransportCredentials(insecure.NewCredentials()))
	must(t, err)
	r.InspectionServiceClient, r.masters = inspectpb.NewInspectionServiceClient(conn), inspectpb.NewMasterServiceClient(conn)
	r.yield, r.recipes = inspectpb.NewYieldServiceClient(conn), inspectpb.NewRecipeServiceClient(conn)
	r.volume = inspectpb.NewVolumeServiceClient(conn)
	t.Cleanup(func() {
		conn.Close()
		g.Stop()
		r.intake.Drain(time.Second)
		r.ledger.Close()
	})
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func quiet() *slog.Logger { return slog.New(slog.NewTextHandler(io.Discard, nil)) }

// frame draws a noisy frame with one disc of the diameter given (0 = none), in px.
func frame(seed uint64, diameter float64) raster.Raw {
	rng := rand.New(rand.NewPCG(seed, 7))
	raw := raster.NewRaw(raster.Mono8, side, side)
	for y := range side {
		for x := range side {
			v := 20 + 1.5*rng.NormFloat64()
			dx, dy := float64(x)-40, float64(y)-50
			if dx*dx+dy*dy <= diameter*diameter/4 {
				v += 80
			}
			raw.Data[y*side+x] = byte(v)
		}
	}
	return raw
}

func header(unit, view string, raw raster.Raw) pipeline.FrameHeader {
	return pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "disc", Lot: "L1", Unit: unit, Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production},
		Capture:  pipeline.Capture{Format: raw.Format, Width: raw.Width, Height: raw.Height, ExposureUS: 100},
		View:     view, Count: 1, Stride: raw.Stride, Captured: time.Now(), CRC32C: pipeline.Checksum(raw.Data),
	}
}

// line is one stream to the server whose answers are collected by unit.
type line struct {
	t      *testing.T
	stream grpc.BidiStreamingClient[inspectpb.InspectRequest, inspectpb.InspectResponse]
	number uint32

	mu       sync.Mutex
	verdicts map[string]*inspectpb.UnitVerdict
	refused  []*inspectpb.FrameRefused
	done     chan error
}

func (r *rig) line() *line {
	r.t.Helper()
	stream, err := r.Inspect(context.Background())
	must(r.t, err)
	l := &line{t: r.t, stream: stream, verdicts: map[string]*inspectpb.UnitVerdict{}, done: make(chan error, 1)}
	go l.receive()
	return l
}

func (l *line) receive() {
	for {
		resp, err := l.stream.Recv()
		if err != nil {
			if errors.Is(err, io.EOF) {
				err = nil
			}
			l.done <- err
			return
		}
		l.mu.Lock()
		if v := resp.GetVerdict(); v != nil {
			l.verdicts[v.Identity.Unit] = v
		} else {
			l.refused = append(l.refused, resp.GetRefused())
		}
		l.mu.Unlock()
	}
}

// start announces a frame and returns its number on the stream.
func (l *line) start(h pipeline.FrameHeader) uint32 {
	l.number++
	l.send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Start{Start: &inspectpb.FrameStart{Frame: l.number, Header: inspectpb.FromFrameHeader(h)}}})
	return l.number
}

func (l *line) chunk(number uint32, offset int, data []byte) {
	l.send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Chunk{Chunk: &inspectpb.FrameChunk{Frame: number, Offset: uint64(offset), Data: data}}})
}

func (l *line) send(m *inspectpb.InspectRequest) {
	if err := l.stream.Send(m); err != nil && !errors.Is(err, io.EOF) {
		l.t.Error(err)
	}
}

// show sends a whole frame in one chunk.
func (l *line) show(h pipeline.FrameHeader, raw raster.Raw) { l.chunk(l.start(h), 0, raw.Data) }

// showUnit sends both views of a unit.
func (l *line) showUnit(unit string, seed uint64, diameter float64) {
	for i, view := range []string{"ring", "bar"} {
		raw := frame(seed+uint64(i)*1000, diameter)
		l.show(header(unit, view, raw), raw)
	}
}

// finish says that no more frames come and waits for all answers.
func (l *line) finish() {
	l.t.Helper()
	must(l.t, l.stream.CloseSend())
	select {
	case err := <-l.done:
		must(l.t, err)
	case <-time.After(20 * time.Second):
		l.t.Fatal("the server did not end the stream")
	}
}

func (l *line) verdict(unit string) (inspectpb.Verdict, []string) {
	l.mu.Lock()
	defer l.mu.Unlock()
	v := l.verdicts[unit]
	if v == nil {
		return inspectpb.Verdict_VERDICT_UNSPECIFIED, []string{"no verdict"}
	}
	var reasons []string
	for _, r := range v.Judgement.Reasons {
		reasons = append(reasons, fmt.Sprintf("%s: %s", r.Name, r.Text))
	}
	return v.Judgement.Verdict, reasons
}
