package ledger

import (
	"context"
	"database/sql"
	"errors"
	"time"

	"lapgate/pipeline"
)

// Outcome is what the line did with a unit.
type Outcome struct {
	Bin       pipeline.Verdict // the bin it went to, named after the verdict that the bin is for
	Confirmed bool             // a sensor at the bin saw it arrive
	At        time.Time        // by the line's clock
	Reported  time.Time        // given by the ledger
}

// Outcome records what the line did after an inspection. The last report counts; the
// earlier ones stay. The same report sent again changes nothing.
func (s *Store) Outcome(ctx context.Context, id pipeline.Identity, o Outcome) error {
	if err := checkVerdict("bin", o.Bin); err != nil {
		return err
	}
	if o.At.Unix() <= 0 {
		return pipeline.Invalid("outcome time: got %s, want when the unit reached its bin", o.At)
	}
	o.At, o.Reported = toMicros(o.At), toMicros(s.Now())
	return s.write(ctx, func(tx *sql.Tx) error {
		var inspection int64
		var verdict pipeline.Verdict
		err := tx.QueryRowContext(ctx, `SELECT id, verdict FROM inspections WHERE `+whereIdentity, identityArgs(id)...).Scan(&inspection, &verdict)
		if err != nil {
			return orMissing(err, "outcome: no inspection on record for %s", describe(id))
		}
		last, err := lastOutcome(ctx, tx, inspection)
		if err != nil || last == (Outcome{o.Bin, o.Confirmed, o.At, last.Reported}) {
			return err
		}
		return insertOutcome(ctx, tx, inspection, o, o.mismatches(verdict), id)
	})
}

// mismatches reports whether the line did something else than the verdict said, or could
// not confirm it. A hold in the reject bin is the rule of a line without a third bin.
func (o Outcome) mismatches(v pipeline.Verdict) bool {
	byRule := v == pipeline.Hold && o.Bin == pipeline.Reject
	return !o.Confirmed || o.Bin != v && !byRule
}

func lastOutcome(ctx context.Context, tx *sql.Tx, inspection int64) (Outcome, error) {
	var at, reported, confirmed int64
	var o Outcome
	err := tx.QueryRowContext(ctx, `SELECT bin, confirmed, at_us, reported_us FROM outcomes WHERE inspection_id = $1 ORDER BY seq DESC LIMIT 1`,
		inspection).Scan(&o.Bin, &confirmed, &at, &reported)
	if errors.Is(err, sql.ErrNoRows) {
		return Outcome{}, nil
	}
	o.Confirmed, o.At, o.Reported = confirmed != 0, fromMicros(at), fromMicros(reported)
	return o, err
}

func insertOutcome(ctx context.Context, tx *sql.Tx, inspection int64, o Outcome, mismatch bool, id pipeline.Identity) error {
	seq, err := nextSeq(ctx, tx, "outcomes", inspection)
	if err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `INSERT INTO outcomes (inspection_id, seq, bin, confirmed, mismatch, at_us, reported_us) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
		inspection, seq, string(o.Bin), flag(o.Confirmed), flag(mismatch), micros(o.At), micros(o.Reported))
	if err != nil {
		return err
	}
	return touch(ctx, tx, id)
}
