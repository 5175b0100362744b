package ledger

import (
	"context"
	"database/sql"
	"fmt"

	"lapgate/pipeline"
)

// NextUnitID returns an id for an unserialised unit, which no other unit of the part has
// or will get: "u" and a number.
func (s *Store) NextUnitID(ctx context.Context, part string) (string, error) {
	if err := pipeline.CheckID("part", part); err != nil {
		return "", err
	}
	var unit string
	err := s.write(ctx, func(tx *sql.Tx) error {
		for taken := true; taken; {
			var n int64
			err := tx.QueryRowContext(ctx, `INSERT INTO unit_counters (part, last_unit) VALUES ($1, 1)
				ON CONFLICT (part) DO UPDATE SET last_unit = unit_counters.last_unit + 1 RETURNING last_unit`, part).Scan(&n)
			if err != nil {
				return err
			}
			unit = fmt.Sprintf("u%08d", n)
			// A serial that a client chose may look the same.
			err = tx.QueryRowContext(ctx, `SELECT EXISTS (SELECT 1 FROM inspections WHERE part = $1 AND unit = $2)`, part, unit).Scan(&taken)
			if err != nil {
				return err
			}
		}
		return nil
	})
	return unit, err
}

// NextAttempt gives out the next attempt for the part, lot, unit, surface, station and
// purpose of id, whatever the line: a retest on another line is a further attempt. Attempts
// given out and never recorded are not given out again.
func (s *Store) NextAttempt(ctx context.Context, id pipeline.Identity) (int, error) {
	id.Attempt = 1
	if err := id.Check(); err != nil {
		return 0, err
	}
	k := keyOf(id)
	var attempt int
	err := s.write(ctx, func(tx *sql.Tx) error {
		var recorded int
		err := tx.QueryRowContext(ctx, `SELECT COALESCE(MAX(attempt), 0) FROM inspections WHERE `+whereStation, k.args()...).Scan(&recorded)
		if err != nil {
			return err
		}
		return tx.QueryRowContext(ctx, `INSERT INTO attempts_issued (part, lot, unit, surface, station, purpose, attempt)
			VALUES ($1, $2, $3, $4, $5, $6, $7)
			ON CONFLICT (part, lot, unit, surface, station, purpose) DO UPDATE SET attempt =
			CASE WHEN attempts_issued.attempt >= excluded.attempt THEN attempts_issued.attempt + 1 ELSE excluded.attempt END
			RETURNING attempt`, k.args(recorded+1)...).Scan(&attempt)
	})
	if err != nil {
		return 0, err
	}
	id.Attempt = attempt
	return attempt, id.Check()
}
