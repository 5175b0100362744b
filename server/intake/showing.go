package intake

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// showing is a unit whose views are still coming or being judged.
type showing struct {
	intake   *Intake
	key      string
	first    pipeline.FrameHeader // of the frame that opened it
	pipe     *pipeline.Pipeline
	opened   time.Time
	deadline *time.Timer
	// earlier is the inspection that the ledger already has under this identity; with one
	// no view is run, since the frames are either the same or in conflict.
	earlier *ledger.Inspection

	mu       sync.Mutex                  // guards everything below
	answers  map[any]Answer              // by client
	frames   map[string][]pipeline.Frame // by view, in the order of arrival
	failures []pipeline.Failure
	results  []pipeline.ViewResult
	running  int // views being run
	lastCame time.Time
	buffers  []*buffer // of the frames' pixels
	closed   bool      // complete, timed out or dropped: takes no more frames
	ended    bool      // answered
	kept     bool      // the image store gives the memory back
	dropped  error
	spooled  bool
}

// errEnded says that a showing was answered between finding it and using it.
var errEnded = errors.New("the showing has ended")

// add gives a frame to its showing, and opens one where there is none. Its memory is
// given back when it is refused.
func (in *Intake) add(frame pipeline.Frame, b *buffer, client any, answer Answer) error {
	err := in.withShowing(frame.Header, func(s *showing) error { return s.take(frame, b, client, answer) })
	if err != nil {
		b.giveBack()
	}
	return err
}

// withShowing calls f with the open showing of h, again with a new one when it ended
// in between.
func (in *Intake) withShowing(h pipeline.FrameHeader, f func(*showing) error) error {
	for {
		s, err := in.open(h)
		if err != nil {
			return err
		}
		if err := f(s); !errors.Is(err, errEnded) {
			return err
		}
	}
}

// Refuse records that a frame of a showing could not be taken: the unit will be held,
// and answer is called with that verdict. It returns false, and does nothing, for a
// refusal that is not the frame's fault and for a header that names no valid unit.
func (in *Intake) Refuse(h pipeline.FrameHeader, why error, client any, answer Answer) bool {
	named := h.Identity
	named.Attempt = max(named.Attempt, 1)
	if pipeline.KindOf(why) != pipeline.InvalidKind || h.Unit == "" || named.Check() != nil {
		return false
	}
	failure := pipeline.Failure{Reason: pipeline.ReasonBadFrame, View: h.View, Detail: why.Error()}
	return in.withShowing(h, func(s *showing) error { return s.fail(failure, client, answer) }) == nil
}

// open returns the open showing that the header belongs to, or a new one.
func (in *Intake) open(h pipeline.FrameHeader) (*showing, error) {
	key := ShowingKey(h)
	in.mu.Lock()
	s, ok := in.showings[key]
	in.mu.Unlock()
	if ok {
		return s, nil
	}
	unlock := in.units.lock(key) // the ledger is asked outside in.mu
	defer unlock()
	in.mu.Lock()
	s, ok = in.showings[key]
	in.mu.Unlock()
	if ok {
		return s, nil
	}
	return in.newShowing(key, h)
}

func (in *Intake) newShowing(key string, h pipeline.FrameHeader) (*showing, error) {
	pipe, err := in.recipes.For(h.Identity)
	if err != nil {
		return nil, err
	}
	s := &showing{intake: in, key: key, first: h, pipe: pipe, opened: in.settings.Now(),
		frames: map[string][]pipeline.Frame{}, answers: map[any]Answer{}}
	if h.Unit != "" && h.Attempt > 0 {
		earlier, err := in.ledger.Find(context.Background(), h.Identity)
		if err == nil {
			s.earlier = &earlier
		} else if pipeline.KindOf(err) != pipeline.NotFoundKind {
			return nil, err
		}
	}
	in.idle.Add(1)
	in.mu.Lock()
	in.showings[key] = s
	in.mu.Unlock()
	s.deadline = time.AfterFunc(s.timeout(), s.timeUp)
	return s, nil
}

func (s *showing) timeout() time.Duration {
	if ms := s.pipe.Recipe.ViewTimeoutMS; ms > 0 {
		return time.Duration(ms) * time.Millisecond
	}
	return time.Duration(s.intake.viewTimeout.Load())
}

// take adds a frame; when its view is whole the view is run, when all are whole the
// showing is finished. A frame that is here already is a resend: its client is
// answered with the others.
func (s *showing) take(f pipeline.Frame, b *buffer, client any, answer Answer) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	h := f.Header
	if s.ended {
		return errEnded
	}
	if s.resent(h) {
		b.giveBack()
		s.answers[client] = answer
		return nil
	}
	if err := s.acceptable(h); err != nil {
		return err
	}
	s.frames[h.View] = append(s.frames[h.View], f)
	s.answers[client] = answer
	s.buffers = append(s.buffers, b)
	s.lastCame = s.intake.settings.Now()
	s.spooled = s.spooled || h.Spooled
	if len(s.frames[h.View]) == h.Count && s.earlier == nil {
		s.start(h.View)
	}
	s.closeIfWhole()
	return nil
}

func (s *showing) resent(h pipeline.FrameHeader) bool {
	return slices.ContainsFunc(s.frames[h.View], func(f pipeline.Frame) bool {
		return f.Header.Index == h.Index && f.Header.CRC32C == h.CRC32C && len(f.Raw.Data) == h.PixelBytes()
	})
}

func (s *showing) acceptable(h pipeline.FrameHeader) error {
	if s.closed {
		return pipeline.Fail(pipeline.Conflict, "identity conflict: unit %s attempt %d is being judged already; show it as the next attempt", h.Unit, h.Attempt)
	}
	want, known := s.pipe.Frames(h.View)
	if !known {
		return pipeline.Invalid("view: got %q, the recipe %s has %v", h.View, s.pipe.Recipe.File, s.pipe.Views())
	}
	if h.Count != want {
		return pipeline.Invalid("count: got %d frames for view %q, the recipe wants %d", h.Count, h.View, want)
	}
	for _, f := range s.frames[h.View] {
		if f.Header.Index == h.Index {
			return pipeline.Fail(pipeline.Conflict, "identity conflict: frame %d of view %q of unit %s attempt %d came twice", h.Index, h.View, h.Unit, h.Attempt)
		}
	}
	return nil
}

// start runs a view on a worker. The caller holds s.mu.
func (s *showing) start(view string) {
	frames := inOrder(s.frames[view])
	s.running++
	s.intake.pool.do(func() {
		res := s.pipe.RunView(context.Background(), s.first.Identity, pipeline.View{Name: view, Frames: frames})
		s.mu.Lock()
		defer s.mu.Unlock()
		s.results = append(s.results, res)
		s.running--
		s.finishIfDone()
	})
}

// inOrder returns frames in the order of their index.
func inOrder(frames []pipeline.Frame) []pipeline.Frame {
	return slices.SortedFunc(slices.Values(frames), func(a, b pipeline.Frame) int { return a.Header.Index - b.Header.Index })
}

// closeIfWhole closes the showing when every view is whole or has failed.
func (s *showing) closeIfWhole() {
	if s.closed {
		return
	}
	for _, view := range s.pipe.Views() {
		if want, _ := s.pipe.Frames(view); len(s.frames[view]) < want && !s.failed(view) {
			return
		}
	}
	s.closed = true
	s.deadline.Stop()
	s.finishIfDone()
}

func (s *showing) failed(view string) bool {
	for _, f := range s.failures {
		if f.View == view || f.View == "" {
			return true
		}
	}
	return false
}

func (s *showing) fail(f pipeline.Failure, client any, answer Answer) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.ended {
		return errEnded
	}
	s.answers[client] = answer
	if s.closed {
		return nil
	}
	s.failures = append(s.failures, f)
	s.lastCame = s.intake.settings.Now()
	s.closeIfWhole()
	return nil
}

// timeUp closes a showing whose views did not all come.
func (s *showing) timeUp() {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return
	}
	for _, view := range s.pipe.Views() {
		want, _ := s.pipe.Frames(view)
		if got := len(s.frames[view]); got < want && !s.failed(view) {
			s.failures = append(s.failures, pipeline.Failure{Reason: pipeline.ReasonMissingView, View: view,
				Detail: fmt.Sprintf("got %d of %d frames within %v", got, want, s.timeout())})
		}
	}
	s.closed = true
	if s.lastCame.IsZero() {
		s.lastCame = s.intake.settings.Now()
	}
	s.finishIfDone()
}

// drop ends a showing without a verdict.
func (s *showing) drop(why error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return
	}
	s.closed, s.dropped = true, why
	s.deadline.Stop()
	s.finishIfDone()
}

// finishIfDone hands a closed showing with no view running to a worker to be judged.
// The caller holds s.mu.
func (s *showing) finishIfDone() {
	if s.closed && s.running == 0 {
		s.running = -1 // only once
		s.intake.pool.do(s.finish)
	}
}
