package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"runtime"
	"sync/atomic"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/health"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/outside"
	"lapgate/server"
	"lapgate/server/alarm"
	"lapgate/server/images"
	"lapgate/server/intake"
	"lapgate/server/ledger"
	"lapgate/server/masters"
	"lapgate/server/retest"
)

// maxStreams is how many calls one connection may have open.
const maxStreams = 256

// serving is a running server.
type serving struct {
	settings configs.Server
	log      *slog.Logger
	ledger   *ledger.Store
	intake   *intake.Intake
	book     *server.Book
	keeper   *keeper
	stages   *stageSet
	frames   *outside.Arena // what frames are received in; nil = no stage outside reads any
	grpc     *grpc.Server
	health   *health.Server
	told     atomic.Pointer[health.Server] // health, once plug-ins can be told of there
	listener net.Listener
	served   chan error

	stopKeepingUp func() // nil = not started
}

// startServing opens the ledger, loads the recipes and listens. It stops by stop.
func startServing(ctx context.Context, set configs.Server, log *slog.Logger) (*serving, error) {
	s := &serving{settings: set, log: log, served: make(chan error, 1)}
	if err := s.open(ctx); err != nil {
		s.close()
		return nil, err
	}
	go func() { s.served <- s.grpc.Serve(s.listener) }()
	s.health.SetServingStatus("", healthpb.HealthCheckResponse_SERVING)
	return s, nil
}

func (s *serving) open(ctx context.Context) error {
	var err error
	if s.settings.Plugins != "" {
		if s.frames, err = outside.NewArena(s.settings.MaxBytesInFlight); err != nil {
			return err
		}
	}
	if s.stages, err = openStages(ctx, s.settings.Plugins, s.log, s.openLater, s.tellStage); err != nil {
		return err
	}
	if s.ledger, err = ledger.Open(ctx, s.settings.Ledger); err != nil {
		return fmt.Errorf("ledger %s: %w", s.settings.Ledger, err)
	}
	if s.keeper, err = newKeeper(s.settings.Images, images.Settings{Policy: images.Policy(s.settings.KeepImages), QuotaBytes: s.settings.ImagesQuotaBytes}, s.log); err != nil {
		return err
	}
	builder := recipeBuilder{stages: s.stages, calibrations: s.settings.Calibrations, ledger: s.ledger}
	s.book = server.NewBook(builder.build)
	people, err := configs.LoadPeople(s.settings.People)
	if err != nil {
		return err
	}
	decode := func(file string, text []byte) (*pipeline.Recipe, error) {
		return configs.DecodeRecipe(file, text, s.stages.current())
	}
	s.requireApproval(ctx, decode)
	feed, stations := server.NewFeed(), server.NewStations()
	again := &retest.Keeper{Ledger: s.ledger, Decode: decode, Log: s.log}
	s.startKeepingUp(ctx, again)
	gate := &masters.Gate{Ledger: s.ledger, Started: time.Now(), Now: time.Now, Log: s.log}
	watch := &alarm.Watch{Ledger: s.ledger, Inner: gate, Now: time.Now, Log: s.log, Settings: alarm.Settings{Units: s.settings.DirtUnits,
		TolerancePx: float64(s.settings.DirtPx), Hold: s.settings.HoldOnDirt, DriftEvery: driftEvery}}
	s.intake, err = intake.New(intake.Settings{MaxBytesInFlight: s.settings.MaxBytesInFlight, MaxFrameBytes: s.settings.MaxFrameBytes,
		Workers: workers(s.settings), ViewTimeout: viewTimeout(s.settings), Log: s.log, Keep: s.keeper.keep, Allocate: s.allocator(), Gate: watch,
		Recorded: func(v intake.Verdict) {
			watch.Recorded(v.Inspection)
			feed.Send(v)
			stations.Inspected(v)
			again.Recorded(v.Inspection)
		}}, s.book, s.ledger)
	if err != nil {
		return err
	}
	if err := s.watchRecipes(ctx, decode); err != nil {
		return err
	}
	s.grpc, s.health = server.NewGRPC(server.Deps{Intake: s.intake, Ledger: s.ledger, Book: s.book, Feed: feed, Log: s.log, Now: time.Now,
		Check: func(file string, text []byte) error { _, err := decode(file, text); return err },
		Gate:  gate, Stations: stations, People: server.People{List: people}, Retest: again, Alarms: watch, OutsideStages: s.stages.states},
		server.GRPCOptions{MaxMessageBytes: int(min(s.settings.MaxBytesInFlight, 1<<30)), MaxStreams: maxStreams, Reflection: s.settings.Reflection})
	s.told.Store(s.health)
	for _, h := range s.stages.hosts {
		s.tellStage(h.Status())
	}
	s.listener, err = net.Listen("tcp", s.settings.Listen)
	return err
}

// driftEvery is how old an answer about the drift of a station may be.
const driftEvery = 10 * time.Second

// keepUpEvery is how often showings that wait to be held against the one before are.
const keepUpEvery = 5 * time.Second

// startKeepingUp runs keepUp until close.
func (s *serving) startKeepingUp(ctx context.Context, again *retest.Keeper) {
	ctx, cancel := context.WithCancel(ctx)
	done := make(chan struct{})
	go func() { s.keepUp(ctx, again); close(done) }()
	s.stopKeepingUp = func() { cancel(); <-done }
}

// keepUp has retests registered also while nobody asks for them.
func (s *serving) keepUp(ctx context.Context, again *retest.Keeper) {
	for {
		if err := again.CatchUp(ctx); err != nil && ctx.Err() == nil {
			s.log.Warn("retests are not registered", "error", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-time.After(keepUpEvery):
		}
	}
}

// openLater opens a stage outside that sees frames where they were received.
func (s *serving) openLater(ctx context.Context, set outside.Settings, log *slog.Logger) (*outside.Host, error) {
	set.Frames = s.frames
	return outside.OpenLater(ctx, set, log)
}

// allocator is where frames are received; nil = Go's own memory.
func (s *serving) allocator() func(int) []byte {
	if s.frames == nil {
		return nil
	}
	return s.frames.Allocate
}

// tellStage puts the state of a stage outside into the health service, as "stage." and
// its type.
func (s *serving) tellStage(st outside.Status) {
	h := s.told.Load()
	if h == nil {
		return
	}
	state := healthpb.HealthCheckResponse_NOT_SERVING
	if st.State == outside.Up {
		state = healthpb.HealthCheckResponse_SERVING
	}
	h.SetServingStatus("stage."+st.Type, state)
}

func workers(s configs.Server) int {
	if s.Workers > 0 {
		return s.Workers
	}
	return runtime.NumCPU()
}

func viewTimeout(s configs.Server) time.Duration {
	return time.Duration(s.ViewTimeoutMS) * time.Millisecond
}

// watchRecipes brings every good recipe of the folder into force, now and on each save.
func (s *serving) watchRecipes(ctx context.Context, decode server.Decode) error {
	if err := os.MkdirAll(s.settings.Recipes, 0o755); err != nil {
		return err
	}
	_, err := configs.Watch(ctx, configs.WatchOptions[*pipeline.Recipe]{
		Folder:  s.settings.Recipes,
		Parse:   decode,
		Changed: func(path string, r *pipeline.Recipe) { s.adopt(ctx, path, r) },
		Failed: func(path string, err error) {
			s.book.Refuse(path, err)
			s.log.Error("recipe refused; the last good one stays in force", "file", path, "error", err)
		},
	})
	return err
}

// adopt keeps a recipe's text in the ledger, then brings it into force.
func (s *serving) adopt(ctx context.Context, path string, r *pipeline.Recipe) {
	err := s.ledger.PutRecipe(ctx, ledger.Recipe{Hash: r.TextHash, Part: r.Part, Revision: r.Revision, Surface: r.Surface,
		File: filepath.Base(path), Text: string(r.Text)})
	if err == nil {
		err = s.book.Put(path, r, time.Now())
	}
	if err != nil {
		s.book.Refuse(path, err)
		s.log.Error("recipe refused; the last good one stays in force", "file", path, "error", err)
		return
	}
	for _, text := range s.stages.unchecked(r) {
		s.log.Warn("recipe in force, but not wholly checked", "file", path, "what", text)
	}
	s.tellRecipe(path, r)
}

func (s *serving) address() string { return s.listener.Addr().String() }

// stop takes no more units, finishes those under way within the grace, and closes all.
func (s *serving) stop() error {
	s.health.SetServingStatus("", healthpb.HealthCheckResponse_NOT_SERVING)
	s.intake.Drain(time.Duration(s.settings.ShutdownGraceMS) * time.Millisecond)
	gone := make(chan struct{})
	go func() { s.grpc.GracefulStop(); close(gone) }()
	select {
	case <-gone:
	case <-time.After(500 * time.Millisecond): // answered streams that their clients keep open
		s.grpc.Stop()
		<-gone
	}
	err := <-s.served
	return errors.Join(err, s.close())
}

func (s *serving) close() error {
	var errs []error
	if s.keeper != nil {
		errs = append(errs, s.keeper.close())
	}
	if s.book != nil {
		errs = append(errs, s.book.Close())
	}
	errs = append(errs, s.stages.close())
	if s.stopKeepingUp != nil {
		s.stopKeepingUp()
	}
	if s.ledger != nil {
		errs = append(errs, s.ledger.Close())
	}
	return errors.Join(errs...)
}
