package intake

import (
	"context"
	"fmt"
	"time"

	"lapgate/pipeline"
)

// Record is what the ledger is asked to keep of a showing.
type Record struct {
	Identity  pipeline.Identity
	Digest    string
	RequestID string
	Captured  time.Time
	Received  time.Time
	Late      bool
	LatencyMS float64
	Evidence  pipeline.Evidence
	Judgement pipeline.Judgement
}

// Ledger is what intake needs of the ledger.
type Ledger interface {
	// Find returns the inspection with this identity, or nil.
	Find(ctx context.Context, id pipeline.Identity) (*Verdict, error)
	// FindFrames returns an inspection of the same part, lot, line and station with the
	// same frames: of the same unit whatever the attempt, or, where the unit is empty, of
	// the same request. Nil = none.
	FindFrames(ctx context.Context, id pipeline.Identity, requestID, digest string) (*Verdict, error)
	// NextUnitID gives a unit id that was never given before.
	NextUnitID(ctx context.Context) (string, error)
	// NextAttempt gives the number of the next showing of the unit's surface.
	NextAttempt(ctx context.Context, id pipeline.Identity) (int, error)
	// Record keeps a showing. Same identity and digest: the stored one comes back with
	// Stored set. Same identity, other digest: an error of kind Conflict.
	Record(ctx context.Context, r Record) (Verdict, error)
}

// ledgerTimeout bounds the ledger calls of one showing.
const ledgerTimeout = 30 * time.Second

// finish judges a closed showing, has the ledger keep it, and answers.
func (s *showing) finish() {
	ctx, cancel := context.WithTimeout(context.Background(), ledgerTimeout)
	defer cancel()
	v, err := Verdict{}, s.dropped
	if err == nil {
		v, err = s.conclude(ctx)
	}
	if err != nil {
		s.intake.settings.Log.Warn("no verdict", "unit", s.first.Unit, "station", s.first.Station, "error", err)
	}
	s.end(v, err)
}

func (s *showing) views() []pipeline.View {
	var out []pipeline.View
	for _, name := range s.pipe.Views() {
		if frames := s.frames[name]; len(frames) > 0 {
			out = append(out, pipeline.View{Name: name, Frames: frames})
		}
	}
	return out
}

func (s *showing) conclude(ctx context.Context) (Verdict, error) {
	digest := pipeline.Digest(s.views())
	if earlier, err := s.knownAlready(ctx, digest); earlier != nil || err != nil {
		if earlier != nil {
			earlier.Stored, earlier.RequestID = true, s.first.RequestID
			return *earlier, nil
		}
		return Verdict{}, err
	}
	id, err := s.identify(ctx)
	if err != nil {
		return Verdict{}, err
	}
	record := s.judge(ctx, id, digest)
	v, err := s.intake.ledger.Record(ctx, record)
	if err != nil {
		return Verdict{}, err
	}
	v.RequestID = s.first.RequestID
	if !v.Stored {
		s.tell(v, record)
	}
	return v, nil
}

// knownAlready returns the stored verdict when these frames were judged before, a
// Conflict when the identity was used for other frames, and neither for a new showing.
func (s *showing) knownAlready(ctx context.Context, digest string) (*Verdict, error) {
	if s.earlier == nil && s.first.Unit != "" && s.first.Attempt > 0 {
		return nil, nil
	}
	same, err := s.intake.ledger.FindFrames(ctx, s.first.Identity, s.first.RequestID, digest)
	if err != nil || same != nil || s.earlier == nil {
		return same, err
	}
	id := s.first.Identity
	return nil, pipeline.Fail(pipeline.Conflict,
		"identity conflict: part %s lot %s unit %s attempt %d on line %s station %s was judged with other frames (inspection %s); give the unit its own id or the next attempt",
		id.Part, id.Lot, id.Unit, id.Attempt, id.Line, id.Station, s.earlier.ID)
}

// identify gives the unit id and the attempt where the line left them to the server.
func (s *showing) identify(ctx context.Context) (pipeline.Identity, error) {
	id := s.first.Identity
	var err error
	if id.Unit == "" {
		if id.Unit, err = s.intake.ledger.NextUnitID(ctx); err != nil {
			return id, err
		}
	}
	if id.Attempt == 0 {
		id.Attempt, err = s.intake.ledger.NextAttempt(ctx, id)
	}
	return id, err
}

func (s *showing) judge(ctx context.Context, id pipeline.Identity, digest string) Record {
	now := s.intake.settings.Now()
	failures := s.failures
	late := s.late(now)
	if late != nil {
		failures = append(failures, *late)
	}
	if most := s.pipe.Recipe.MaxAttempts; most > 0 && id.Attempt > most {
		failures = append(failures, pipeline.Failure{Reason: pipeline.ReasonAttempts,
			Detail: fmt.Sprintf("this is attempt %d, the recipe allows %d; a person has to decide", id.Attempt, most)})
	}
	evidence, judgement := s.pipe.Finish(ctx, id, s.results, failures, now)
	for i, v := range evidence.Views {
		for j := range v.Frames {
			evidence.Views[i].Frames[j].Header.Identity = id
		}
	}
	return Record{Identity: id, Digest: digest, RequestID: s.first.RequestID, Captured: s.captured(now), Received: s.opened,
		Late: late != nil, LatencyMS: float64(now.Sub(s.lastCame).Microseconds()) / 1000, Evidence: evidence, Judgement: judgement}
}

// late says whether the verdict comes after the part has gone.
func (s *showing) late(now time.Time) *pipeline.Failure {
	if s.spooled {
		return &pipeline.Failure{Reason: pipeline.ReasonLate, Detail: "the frames waited in a spool; the part has gone"}
	}
	within := time.Duration(s.first.AnswerWithinMS) * time.Millisecond
	if took := now.Sub(s.opened); within > 0 && took > within {
		return &pipeline.Failure{Reason: pipeline.ReasonLate, Detail: fmt.Sprintf("judged %v after the first frame came, the line waits %v", took.Round(time.Millisecond), within)}
	}
	return nil
}

// clockTolerance is how far a line's clock may run ahead of the server's.
const clockTolerance = 5 * time.Minute

// captured returns the time of capture; one in the future beyond the tolerance is
// replaced by the time of judging (the header keeps what the line said).
func (s *showing) captured(now time.Time) time.Time {
	if s.first.Captured.After(now.Add(clockTolerance)) {
		s.intake.settings.Log.Warn("clock ahead", "unit", s.first.Unit, "station", s.first.Station, "captured", s.first.Captured)
		return now
	}
	return s.first.Captured
}

func (s *showing) tell(v Verdict, r Record) {
	if s.intake.settings.Keep != nil {
		s.intake.settings.Keep(v, s.views())
	}
	if s.intake.settings.Recorded != nil {
		s.intake.settings.Recorded(v, s.pipe, r.Captured)
	}
}

// end removes the showing, gives its memory back and answers every client.
func (s *showing) end(v Verdict, err error) {
	in := s.intake
	in.mu.Lock()
	delete(in.showings, s.key)
	in.mu.Unlock()
	s.mu.Lock()
	s.ended = true
	answers := s.answers
	s.mu.Unlock()
	in.admission.give(s.bytes)
	for _, answer := range answers {
		answer(v, err)
	}
	in.idle.Done()
}
