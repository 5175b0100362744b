package intake

import (
	"context"
	"fmt"
	"slices"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Ledger is what intake needs of the ledger; see ledger.Store.
type Ledger interface {
	Find(ctx context.Context, id pipeline.Identity) (ledger.Inspection, error)
	FindRequest(ctx context.Context, line, station, requestID string) (ledger.Inspection, error)
	FindDigest(ctx context.Context, id pipeline.Identity, digest string) (ledger.Inspection, error)
	NextUnitID(ctx context.Context, part string) (string, error)
	NextAttempt(ctx context.Context, id pipeline.Identity) (int, error)
	Record(ctx context.Context, in ledger.Inspection) (stored ledger.Inspection, fresh bool, err error)
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
	if same, known, err := s.knownAlready(ctx, digest); known || err != nil {
		return Verdict{Inspection: same, Stored: true}, err
	}
	id, err := s.identify(ctx)
	if err != nil {
		return Verdict{}, err
	}
	record, leave, err := s.judgeAtGate(ctx, id, digest)
	if err != nil {
		return Verdict{}, err
	}
	defer leave()
	s.keep(&record)
	stored, fresh, err := s.intake.ledger.Record(ctx, record)
	if err != nil {
		return Verdict{}, err
	}
	v := Verdict{Inspection: stored, Stored: !fresh}
	if fresh {
		s.logFailures(v)
	}
	if fresh && s.intake.settings.Recorded != nil {
		s.intake.settings.Recorded(v)
	}
	return v, nil
}

// logFailures says which stage failed on which unit; a stage that fails on every unit is
// for the log, not only for the verdicts.
func (s *showing) logFailures(v Verdict) {
	for _, f := range v.Evidence.Failures {
		if f.Stage != "" {
			s.intake.settings.Log.Warn(f.Reason, "unit", v.Unit, "inspection", v.ID, "stage", f.Stage, "view", f.View, "detail", f.Detail)
		}
	}
}

// keep offers the frames to the image store and notes in the record where they will be.
// The memory is then given back when the store has written them.
func (s *showing) keep(record *ledger.Inspection) {
	if s.intake.settings.Keep == nil {
		return
	}
	var frames []pipeline.Frame
	var places []*string
	for i := range record.Evidence.Views {
		v := &record.Evidence.Views[i]
		for j := range v.Frames {
			frames = append(frames, pipeline.Frame{Header: v.Frames[j].Header, Raw: inOrder(s.frames[v.Name])[j].Raw})
			places = append(places, &v.Frames[j].Stored)
		}
	}
	s.kept = true
	buffers := s.buffers
	for i, key := range s.intake.settings.Keep(record.Judgement.Verdict, frames, func() { giveBackAll(buffers) }) {
		*places[i] = key
	}
}

// knownAlready returns the stored inspection when these frames were judged before, a
// Conflict when the identity was used for other frames, and neither for a new showing.
func (s *showing) knownAlready(ctx context.Context, digest string) (same ledger.Inspection, known bool, err error) {
	id := s.first.Identity
	switch {
	case s.earlier != nil:
		same = *s.earlier
	case id.Unit == "":
		same, err = s.intake.ledger.FindRequest(ctx, id.Line, id.Station, s.first.RequestID)
	case id.Attempt == 0:
		same, err = s.intake.ledger.FindDigest(ctx, id, digest)
	default:
		return same, false, nil
	}
	if pipeline.KindOf(err) == pipeline.NotFoundKind && err != nil {
		return same, false, nil
	}
	if err == nil && same.Digest != digest {
		err = pipeline.Fail(pipeline.Conflict,
			"%s: part %s lot %s unit %s attempt %d on line %s station %s was judged with other frames (inspection %d); give the unit its own id or the next attempt",
			pipeline.ReasonConflict, id.Part, id.Lot, same.Unit, same.Attempt, id.Line, id.Station, same.ID)
	}
	return same, err == nil, err
}

// identify gives the unit id and the attempt where the line left them to the server.
func (s *showing) identify(ctx context.Context) (pipeline.Identity, error) {
	id := s.first.Identity
	var err error
	if id.Unit == "" {
		if id.Unit, err = s.intake.ledger.NextUnitID(ctx, id.Part); err != nil {
			return id, err
		}
	}
	if id.Attempt == 0 {
		id.Attempt, err = s.intake.ledger.NextAttempt(ctx, id)
	}
	return id, err
}

func (s *showing) judge(ctx context.Context, id pipeline.Identity, digest string, holds []pipeline.Failure) ledger.Inspection {
	now := s.intake.settings.Now()
	failures := append(slices.Clone(s.failures), holds...)
	late := s.late(now)
	if late != nil {
		failures = append(failures, *late)
	}
	if most := s.pipe.Recipe.MaxAttempts; most > 0 && id.Attempt > most && id.Purpose != pipeline.Master {
		failures = append(failures, pipeline.Failure{Reason: pipeline.ReasonAttempts,
			Detail: fmt.Sprintf("this is attempt %d, the recipe allows %d; a person has to decide", id.Attempt, most)})
	}
	evidence, judgement := s.pipe.Finish(ctx, id, s.results, failures, now)
	for i, v := range evidence.Views {
		for j := range v.Frames {
			evidence.Views[i].Frames[j].Header.Identity = id
		}
	}
	return ledger.Inspection{Identity: id, Digest: digest, RequestID: s.first.RequestID, Captured: s.captured(), Judged: now,
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

// captured returns when the last frame of the showing was taken, by the line's clock.
func (s *showing) captured() time.Time {
	last := s.first.Captured
	for _, frames := range s.frames {
		for _, f := range frames {
			if f.Header.Captured.After(last) {
				last = f.Header.Captured
			}
		}
	}
	return last
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
	if !s.kept {
		giveBackAll(s.buffers)
	}
	for _, answer := range answers {
		answer(v, err)
	}
	in.idle.Done()
}
