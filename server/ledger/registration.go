package ledger

import (
	"context"
	"database/sql"
	"errors"
	"time"

	"lapgate/pipeline"
)

// Registration is how a showing of a unit lies to the one before it, which of that one's
// defects are still there, and what the unit's first showing is worth by those alone.
type Registration struct {
	Previous        int64            `json:"-"`                // the inspection just before
	Against         int64            `json:"against"`          // the one it was held against: the latest complete one before
	PreviousAttempt int              `json:"previous_attempt"` // of Against
	Known           bool             `json:"known"`            // false: too little in common; every defect counts as permanent
	RotationDeg     float64          `json:"rotation_deg"`
	ShiftUUM        float64          `json:"shift_u_um"`
	ShiftVUM        float64          `json:"shift_v_um"`
	RMSUM           float64          `json:"rms_um"`
	Pairs           []DefectPair     `json:"pairs"`
	Removable       []int            `json:"removable"` // ids in the showing before: gone or moved
	Arrived         []int            `json:"arrived"`   // ids in this one that were not there before
	Verdict         pipeline.Verdict `json:"-"`         // of the first showing, by its permanent defects alone
	Reasons         []string         `json:"-"`         // of that, each once
	At              time.Time        `json:"-"`         // zero = now
}

// DefectPair is one defect in two showings, by its ids.
type DefectPair struct {
	Previous   int     `json:"previous"`
	This       int     `json:"this"`
	DistanceUM float64 `json:"distance_um"`
}

// PutRegistration keeps the registration of a showing, in place of the one it had.
func (s *Store) PutRegistration(ctx context.Context, id int64, r Registration) error {
	if err := checkVerdict("permanent verdict", r.Verdict); err != nil {
		return err
	}
	body, err := toJSON("registration", r)
	if err != nil {
		return err
	}
	reasons, err := toJSON("reasons", r.Reasons)
	if err != nil {
		return err
	}
	if r.At.IsZero() {
		r.At = s.Now()
	}
	return s.write(ctx, func(tx *sql.Tx) error {
		in, err := scanInspection(tx.QueryRowContext(ctx, `SELECT `+inspectionColumns+` FROM inspections WHERE id = $1`, id))
		if err != nil {
			return orMissing(err, "inspection %d: not on record", id)
		}
		_, err = tx.ExecContext(ctx, `INSERT INTO registrations (inspection_id, previous_id, body, permanent_verdict, permanent_reasons, at_us)
			VALUES ($1, $2, $3, $4, $5, $6) ON CONFLICT (inspection_id) DO UPDATE SET previous_id = excluded.previous_id, body = excluded.body,
			permanent_verdict = excluded.permanent_verdict, permanent_reasons = excluded.permanent_reasons, at_us = excluded.at_us`,
			id, r.Previous, body, string(r.Verdict), reasons, micros(r.At))
		if err != nil {
			return err
		}
		return touch(ctx, tx, in.Identity)
	})
}

// registrationOf returns how a showing lies to the one before; nil = nothing is on record.
func (s *Store) registrationOf(ctx context.Context, id int64) (*Registration, error) {
	var r Registration
	var body, reasons string
	var at int64
	err := s.reader.QueryRowContext(ctx, `SELECT previous_id, body, permanent_verdict, permanent_reasons, at_us FROM registrations WHERE inspection_id = $1`, id).
		Scan(&r.Previous, &body, &r.Verdict, &reasons, &at)
	if errors.Is(err, sql.ErrNoRows) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	r.At = fromMicros(at)
	if err := fromJSON("registration", body, &r); err != nil {
		return nil, err
	}
	return &r, fromJSON("reasons", reasons, &r.Reasons)
}

// previousShowing is the id of the showing before i of the same unit.
const previousShowing = `(SELECT p.id FROM inspections p WHERE p.part = i.part AND p.lot = i.lot AND p.unit = i.unit AND p.surface = i.surface
	AND p.station = i.station AND p.purpose = i.purpose AND p.attempt < i.attempt ORDER BY p.attempt DESC, p.counted_us DESC, p.id DESC LIMIT 1)`

// Unregistered returns the identities of production units some of whose showings have not
// been held against the one before, or against another one than is before it now.
func (s *Store) Unregistered(ctx context.Context) ([]pipeline.Identity, error) {
	var out []pipeline.Identity
	seen := map[stationKey]bool{}
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		in, err := scanInspection(r)
		if key := keyOf(in.Identity); err == nil && !seen[key] {
			seen[key] = true
			out = append(out, in.Identity)
		}
		return err
	}, `SELECT `+inspectionColumns+` FROM (SELECT i.*, `+previousShowing+` AS before_id FROM inspections i WHERE i.attempt > 1 AND i.purpose = $1) a
		LEFT JOIN registrations r ON r.inspection_id = a.id
		WHERE before_id IS NOT NULL AND (r.previous_id IS NULL OR r.previous_id <> before_id) ORDER BY counted_us, id`, string(pipeline.Production))
	return out, s.engine.classify(err)
}

// Attempts returns all showings of one unit's surface at one kind of station with their
// evidence, in order of attempt.
func (s *Store) Attempts(ctx context.Context, id pipeline.Identity) ([]Showing, error) {
	var out []Showing
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		in, err := scanInspection(r)
		out = append(out, Showing{Inspection: in})
		return err
	}, `SELECT `+inspectionColumns+` FROM inspections WHERE `+whereStation+` ORDER BY attempt, counted_us, id`, keyOf(id).args()...)
	for i := range out {
		if err == nil {
			err = s.complete(ctx, &out[i].Inspection)
		}
		if err == nil {
			out[i].Registration, err = s.registrationOf(ctx, out[i].ID)
		}
	}
	return out, s.engine.classify(err)
}
