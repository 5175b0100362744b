package main

import (
	"context"
	"fmt"
	"log/slog"
	"math/rand/v2"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/cmd/lapgate/spool"
	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// feedLimits are the numbers that a feed runs by.
type feedLimits struct {
	inFlight    int           // units sent and not answered
	retryHolds  int           // how often a hold of our own making is shown again
	alwaysSpool bool          // keep every frame on disk before it is sent
	live        bool          // the source is a line, not an archive: new units go before kept ones
	lateAfter   time.Duration // a frame without answer_within_ms that waited longer for a server is late
	answerTime  time.Duration // silence after which a stream counts as broken
	giveUp      time.Duration // how long to look for a server once the source has ended
	drain       time.Duration // how long to wait for answers once told to stop
	refusedWait time.Duration // how long to wait for the verdict of a unit with a refused frame
	firstRetry  time.Duration // before the first new connection; then doubled …
	lastRetry   time.Duration // … up to this
}

// feeder moves frames from a source to a server and verdicts to the output. Its fields
// belong to the goroutine that runs it.
type feeder struct {
	feedLimits
	client   inspectpb.InspectionServiceClient
	spool    *spool.Spool // nil = none
	out      output
	log      *slog.Logger
	heart    *heart
	moveTo   string
	progress *progress
	now      func() time.Time

	byRequest  map[string]*showing
	byKey      map[string][]*showing // oldest first: only the first may be sent
	order      []*showing
	active     int
	queued     int             // frames in memory that are to be sent
	reported   map[string]bool // showings whose hold was told: a file or frame could not be taken
	byNumber   map[uint32]sentFrame
	lastNumber uint32
	counts     feedCounts

	link        *link
	opened      chan opening // a link, or why there is none
	opening     bool
	failures    int       // connections in a row that brought no answer
	lastHeard   time.Time // or sent
	awaySince   time.Time
	stoppedAt   time.Time // told to stop
	pausedUntil time.Time // no new unit before
	spoolFull   bool
	saidAway    bool
	sourceDone  bool
	sourceEnded time.Time
	sourceErr   error
	fatal       error
}

type sentFrame struct {
	s *showing
	f *held
}

type opening struct {
	link *link
	err  error
}

// feedCounts is what the summary tells.
type feedCounts struct {
	frames, units, accepted, rejected, heldUnits, stored, late int
	refused, conflicts, unread, retried, broken                int
}

// run feeds until the source has ended and every unit is answered.
func (f *feeder) run(ctx context.Context, s source) error {
	f.byRequest, f.byKey, f.byNumber = map[string]*showing{}, map[string][]*showing{}, map[uint32]sentFrame{}
	f.reported, f.opened = map[string]bool{}, make(chan opening, 1)
	f.awaySince = f.now()
	if err := f.recover(); err != nil {
		return err
	}
	readings, sourceEnded := make(chan reading), make(chan error, 1)
	sourceCtx, stopSource := context.WithCancel(ctx)
	defer stopSource()
	go func() {
		sourceEnded <- s(sourceCtx, readings)
	}()
	streams, stopStreams := context.WithCancel(context.Background())
	defer stopStreams()
	stop := ctx.Done()
	for !f.finished() {
		f.openIfAway(streams)
		out, next, wake := f.choose()
		select {
		case out <- next.job:
			f.noteSent(next)
		case r := <-f.wants(readings):
			f.take(r)
		case f.sourceErr = <-sourceEnded:
			f.endSource()
		case r := <-f.responses():
			f.answered(r)
		case err := <-f.ended():
			f.lost(err)
		case o := <-f.opened:
			f.noteOpened(o)
		case <-wake:
			f.checkSilence()
		case <-stop:
			stop = nil
			f.stop(stopSource)
		}
	}
	return f.close()
}

func (f *feeder) stop(stopSource context.CancelFunc) {
	f.log.Info("stopping; waiting for answers that are due", "units", len(f.order), "at_most", f.drain)
	f.stoppedAt = f.now()
	stopSource()
	f.endSource()
}

func (f *feeder) endSource() {
	if !f.sourceDone {
		f.sourceDone, f.sourceEnded = true, f.now()
	}
}

// finished: all is answered, or there is no point in waiting on.
func (f *feeder) finished() bool {
	now := f.now()
	switch {
	case f.fatal != nil:
		return true
	case !f.sourceDone:
		return false
	case len(f.order) == 0:
		return true
	case !f.stoppedAt.IsZero() && now.Sub(f.stoppedAt) > f.drain:
		return true
	}
	return f.link == nil && now.Sub(f.awaySince) > f.giveUp && now.Sub(f.sourceEnded) > f.giveUp
}

// wants returns the source's channel while there is room for another frame. A spool
// makes room while the server is away.
func (f *feeder) wants(readings chan reading) chan reading {
	if f.sourceDone || f.queued > 2*f.inFlight || (f.spoolFull && f.link == nil) {
		return nil
	}
	return readings
}

func (f *feeder) responses() chan *inspectpb.InspectResponse {
	if f.link == nil {
		return nil
	}
	return f.link.responses
}

func (f *feeder) ended() chan error {
	if f.link == nil {
		return nil
	}
	return f.link.ended
}

// openIfAway looks for a server, after a pause that doubles with every failure.
func (f *feeder) openIfAway(ctx context.Context) {
	if f.link != nil || f.opening {
		return
	}
	f.opening = true
	pause := f.pause()
	go func() {
		time.Sleep(pause)
		l, err := openLink(ctx, f.client)
		f.opened <- opening{l, err}
	}()
}

func (f *feeder) pause() time.Duration {
	if f.failures == 0 {
		return 0
	}
	d := f.firstRetry << min(f.failures-1, 20)
	return time.Duration(float64(min(d, f.lastRetry)) * (0.75 + rand.Float64()/2))
}

func (f *feeder) noteOpened(o opening) {
	f.opening = false
	f.failures++ // until the server answers
	if o.err != nil {
		f.away(o.err)
		return
	}
	f.link, f.lastHeard, f.spoolFull = o.link, f.now(), false
}

// lost takes note that the stream has ended; everything unanswered will be sent again.
func (f *feeder) lost(err error) {
	f.link.cancel()
	f.link = nil
	if f.failures <= 1 { // a server that takes and drops every stream is away, too
		f.awaySince = f.now()
	}
	clear(f.byNumber)
	f.active = 0
	for _, s := range f.order {
		s.unsend()
	}
	f.away(err)
}

// away says once that the server is away, keeps what is in memory on disk, and ends
// the feed where trying again cannot help.
func (f *feeder) away(err error) {
	switch code := status.Code(err); code {
	case codes.Unimplemented, codes.Unauthenticated, codes.PermissionDenied, codes.InvalidArgument, codes.FailedPrecondition:
		f.fatal = fmt.Errorf("the server ended the stream (%v): %w", code, inspectpb.ToError(err))
	}
	if !f.saidAway && (len(f.order) > 0 || !f.sourceDone) {
		f.saidAway = true
		f.log.Warn("no stream to the server; trying again", "error", reasonOf(err), "units_unanswered", len(f.order))
	}
	for _, s := range f.order {
		for _, h := range s.frames {
			h.waited = true
			f.keep(h)
			f.queue(h)
		}
	}
}

func reasonOf(err error) string {
	if err == nil {
		return "the server closed the stream"
	}
	return status.Convert(err).Message()
}

// checkSilence breaks a stream on which frames are due an answer and nothing moves,
// and gives up waiting for verdicts of units that are reported as held already.
func (f *feeder) checkSilence() {
	now := f.now()
	if f.link != nil && f.active > 0 && now.Sub(f.lastHeard) > f.answerTime {
		f.log.Warn("the server is silent; opening another stream", "units_unanswered", f.active, "for", f.answerTime)
		f.link.cancel()
	}
	for _, s := range f.order {
		if s.refused && now.Sub(s.lastSent) > f.refusedWait {
			f.finish(s)
			return
		}
	}
}

// close keeps what is unanswered and says whether the feed did its job.
func (f *feeder) close() error {
	if f.link != nil {
		f.link.stream.CloseSend() //nolint:errcheck // nothing is left to be sent
		f.link.cancel()
	}
	left, kept := len(f.order), 0
	for _, s := range f.order {
		if f.keepAll(s) {
			kept++
		}
	}
	if f.fatal != nil {
		return f.fatal
	}
	if f.sourceErr != nil && f.stoppedAt.IsZero() {
		return f.sourceErr
	}
	if left > 0 {
		return pipeline.Fail(pipeline.Unready, "%d units have no verdict: %d are kept in the spool and are sent by the next feed with the same --spool, %d must be fed again", left, kept, left-kept)
	}
	return f.counts.failure()
}

func (c feedCounts) failure() error {
	if c.conflicts+c.refused+c.unread+c.broken == 0 {
		return nil
	}
	text := fmt.Sprintf("%d frames refused, %d files not taken, %d answers not understood", c.refused, c.unread, c.broken)
	if c.conflicts > 0 {
		text = fmt.Sprintf("%d units in identity conflict: their ids were used for other frames (did a counter restart? give a new --lot, or the next attempt); %s", c.conflicts, text)
	}
	return fmt.Errorf("%s; each of these units is held: see the output lines", text)
}
