package ledger

import (
	"context"
	"database/sql"
	"errors"
	"strings"
	"time"
	"unicode"

	"lapgate/pipeline"
)

// Decision is how a person closes a hold.
type Decision string

// The decisions. Clean and rework send the unit round again; until it is shown, its last
// word is still open.
const (
	DecideAccept Decision = "accept"
	DecideReject Decision = "reject"
	DecideClean  Decision = "clean"
	DecideRework Decision = "rework"
)

// Disposition is a person's closing of a hold.
type Disposition struct {
	Decision Decision
	Person   string
	Reason   string
	At       time.Time // zero = now
}

const (
	maxPerson = 128
	maxReason = 2000
)

func (d Disposition) check() error {
	switch d.Decision {
	case DecideAccept, DecideReject, DecideClean, DecideRework:
	default:
		return pipeline.Invalid("disposition: got %q, want accept, reject, clean or rework", d.Decision)
	}
	if err := checkText("person", d.Person, maxPerson); err != nil {
		return err
	}
	return checkText("reason", d.Reason, maxReason)
}

func checkText(field, text string, most int) error {
	if strings.TrimSpace(text) == "" || len(text) > most || strings.ContainsFunc(text, unicode.IsControl) {
		return pipeline.Invalid("%s: got %q, want 1 to %d bytes of text on one line", field, text, most)
	}
	return nil
}

// Dispose closes an open hold: one without a disposition and without a later attempt.
// The line's verdict stays as it was; the person's judgement is added beside it. The same
// disposition sent again changes nothing.
func (s *Store) Dispose(ctx context.Context, id int64, d Disposition) error {
	if err := d.check(); err != nil {
		return err
	}
	if d.At.IsZero() {
		d.At = s.Now()
	}
	d.At = toMicros(d.At)
	return s.write(ctx, func(tx *sql.Tx) error {
		in, err := scanInspection(tx.QueryRowContext(ctx, `SELECT `+inspectionColumns+` FROM inspections WHERE id = $1`, id))
		if err != nil {
			return orMissing(err, "inspection %d: not on record", id)
		}
		if done, err := checkOpen(ctx, tx, in, d); err != nil || done {
			return err
		}
		return insertDisposition(ctx, tx, in, d)
	})
}

// checkOpen refuses a disposition of what is not an open hold; done says that the very
// same one is on record.
func checkOpen(ctx context.Context, tx *sql.Tx, in Inspection, d Disposition) (done bool, err error) {
	if in.Judgement.Verdict != pipeline.Hold {
		return false, pipeline.Invalid("inspection %d: its verdict is %s: only a hold can be disposed of", in.ID, in.Judgement.Verdict)
	}
	var old Disposition
	err = tx.QueryRowContext(ctx, `SELECT decision, person, reason FROM dispositions WHERE inspection_id = $1`, in.ID).
		Scan(&old.Decision, &old.Person, &old.Reason)
	if err == nil {
		if old.Decision == d.Decision && old.Person == d.Person && old.Reason == d.Reason {
			return true, nil
		}
		return false, pipeline.Invalid("inspection %d: %s closed this hold as %s already: show the unit again to judge it anew", in.ID, old.Person, old.Decision)
	}
	if !errors.Is(err, sql.ErrNoRows) {
		return false, err
	}
	var attempt int
	var verdict string
	err = tx.QueryRowContext(ctx, `SELECT attempt, verdict FROM inspections WHERE `+whereStation+
		` AND (attempt > $7 OR attempt = $7 AND (counted_us > $8 OR counted_us = $8 AND id > $9)) ORDER BY attempt DESC LIMIT 1`,
		keyOf(in.Identity).args(in.Attempt, micros(in.Counted), in.ID)...).Scan(&attempt, &verdict)
	if errors.Is(err, sql.ErrNoRows) {
		return false, nil
	}
	if err != nil {
		return false, err
	}
	return false, pipeline.Invalid("inspection %d: the unit was shown again since (attempt %d: %s): that showing has the last word", in.ID, attempt, verdict)
}

func insertDisposition(ctx context.Context, tx *sql.Tx, in Inspection, d Disposition) error {
	_, err := tx.ExecContext(ctx, `INSERT INTO dispositions (inspection_id, decision, person, reason, at_us) VALUES ($1, $2, $3, $4, $5)`,
		in.ID, string(d.Decision), d.Person, d.Reason, micros(d.At))
	if err != nil {
		return err
	}
	seq, err := nextSeq(ctx, tx, "judgements", in.ID)
	if err != nil {
		return err
	}
	if err := insertJudgement(ctx, tx, in.ID, seq, d.judgement()); err != nil {
		return err
	}
	return touch(ctx, tx, in.Identity)
}

func (d Disposition) judgement() pipeline.Judgement {
	verdict := pipeline.Hold
	if d.Decision == DecideAccept || d.Decision == DecideReject {
		verdict = pipeline.Verdict(d.Decision)
	}
	return pipeline.Judgement{Verdict: verdict, By: pipeline.ByPerson, Person: d.Person, At: d.At,
		Reasons: []pipeline.Reason{{Name: "disposition: " + string(d.Decision), Verdict: verdict, Text: d.Reason}}}
}
