package ledger

import (
	"context"
	"database/sql"
	"errors"
	"slices"
	"time"

	"lapgate/pipeline"
)

// StationChange is something exchanged or moved at a station; its masters are then due.
type StationChange struct {
	Line, Station, What, Person, Reason string
	At                                  time.Time // zero = now
}

// StationParts lists what a change can be of.
func StationParts() []string { return []string{"lamp", "lens", "camera"} }

// Change records a change of a station.
func (s *Store) Change(ctx context.Context, c StationChange) error {
	for _, f := range []struct{ field, id string }{{"line", c.Line}, {"station", c.Station}} {
		if err := pipeline.CheckID(f.field, f.id); err != nil {
			return err
		}
	}
	if !slices.Contains(StationParts(), c.What) {
		return pipeline.Invalid("what: got %q, want one of %v", c.What, StationParts())
	}
	if err := errors.Join(checkText("person", c.Person, maxPerson), checkText("reason", c.Reason, maxReason)); err != nil {
		return err
	}
	if c.At.IsZero() {
		c.At = s.Now()
	}
	return s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO station_changes (id, line, station, what, person, reason, at_us) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
			newID(), c.Line, c.Station, c.What, c.Person, c.Reason, micros(c.At))
		return err
	})
}

// LastChange returns the latest change of a station, or an error of kind NotFoundKind.
func (s *Store) LastChange(ctx context.Context, line, station string) (StationChange, error) {
	c := StationChange{Line: line, Station: station}
	var at int64
	err := s.reader.QueryRowContext(ctx, `SELECT what, person, reason, at_us FROM station_changes WHERE line = $1 AND station = $2
		ORDER BY at_us DESC, id DESC LIMIT 1`, line, station).Scan(&c.What, &c.Person, &c.Reason, &at)
	c.At = fromMicros(at)
	return c, s.engine.classify(orMissing(err, "line %s, station %s: no change on record", line, station))
}
