package ledger

import (
	"fmt"
	"time"

	"lapgate/pipeline"
)

// Inspection is one showing of one surface of one unit, as it is recorded.
type Inspection struct {
	ID int64 // given by the ledger
	pipeline.Identity
	Digest    string    // of the frames, see pipeline.Digest
	RequestID string    // the client's, may be empty
	Captured  time.Time // when the last frame was taken, by the camera's clock
	Judged    time.Time // when the verdict was ready; zero = now
	Late      bool      // came too late for the line to act on; the verdict must then be hold
	LatencyMS float64   // from the last byte received to the verdict
	Evidence  pipeline.Evidence
	Judgement pipeline.Judgement // the line's
	Check     *MasterCheck       // of a master that its recipe names; nil = none. Written, not read back

	Counted time.Time // given by the ledger: the time under which the showing counts
	Clock   Clock     // given by the ledger
}

// Clock says whether the camera's clock can be believed.
type Clock string

// The findings about a clock.
const (
	ClockFine   Clock = ""
	ClockAhead  Clock = "ahead"  // of the judged time, which counts instead
	ClockBehind Clock = "behind" // by days: counted as captured, but flagged
)

// How far a camera's clock may be off before it is flagged.
const (
	MaxAhead  = 5 * time.Minute
	MaxBehind = 3 * 24 * time.Hour
)

// prepare checks in and fills what the ledger gives but the ID.
func (in *Inspection) prepare(now time.Time) error {
	if in.Judged.IsZero() {
		in.Judged = now
	}
	if in.Judgement.By == "" {
		in.Judgement.By = pipeline.ByLine
	}
	if in.Judgement.At.IsZero() {
		in.Judgement.At = in.Judged
	}
	if err := in.check(); err != nil {
		return err
	}
	in.Captured, in.Judged = toMicros(in.Captured), toMicros(in.Judged)
	in.Judgement.At = toMicros(in.Judgement.At)
	in.Counted, in.Clock = in.Captured, ClockFine
	switch behind := in.Judged.Sub(in.Captured); {
	case behind < -MaxAhead:
		in.Counted, in.Clock = in.Judged, ClockAhead
	case behind > MaxBehind:
		in.Clock = ClockBehind
	}
	return nil
}

func (in *Inspection) check() error {
	if err := in.Identity.Check(); err != nil {
		return err
	}
	switch {
	case in.Digest == "":
		return pipeline.Invalid("digest: not given, want that of the frames")
	case in.Captured.Unix() < 0 || in.Judged.Unix() < 0:
		return pipeline.Invalid("captured %s, judged %s: want times after 1970", in.Captured, in.Judged)
	case in.Judgement.By != pipeline.ByLine:
		return pipeline.Invalid("judgement by: got %q, want %q", in.Judgement.By, pipeline.ByLine)
	case in.Late && in.Judgement.Verdict != pipeline.Hold:
		return pipeline.Invalid("verdict: got %q for a late inspection, want hold: nobody acted on it", in.Judgement.Verdict)
	}
	return checkVerdict("verdict", in.Judgement.Verdict)
}

func checkVerdict(field string, v pipeline.Verdict) error {
	switch v {
	case pipeline.Accept, pipeline.Reject, pipeline.Hold:
		return nil
	}
	return pipeline.Invalid("%s: got %q, want accept, reject or hold", field, v)
}

// toMicros cuts a time to what the ledger keeps.
func toMicros(t time.Time) time.Time { return fromMicros(micros(t)) }

// stationKey names one unit's surface at one kind of station, whatever the line:
// attempts are counted over it, and the last of them is the unit's last word.
type stationKey struct {
	part, lot, unit, surface, station, purpose string
}

func keyOf(id pipeline.Identity) stationKey {
	return stationKey{id.Part, id.Lot, id.Unit, id.Surface, id.Station, string(id.Purpose)}
}

// whereStation is the condition whose arguments are those of stationKey.args.
const whereStation = `part = $1 AND lot = $2 AND unit = $3 AND surface = $4 AND station = $5 AND purpose = $6`

func (k stationKey) args(more ...any) []any {
	return append([]any{k.part, k.lot, k.unit, k.surface, k.station, k.purpose}, more...)
}

func describe(id pipeline.Identity) string {
	return fmt.Sprintf("part %s, lot %q, unit %s, surface %q, line %s, station %s, attempt %d, %s",
		id.Part, id.Lot, id.Unit, id.Surface, id.Line, id.Station, id.Attempt, id.Purpose)
}
