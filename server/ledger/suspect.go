package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"lapgate/pipeline"
)

// Cause is why a master makes units suspect.
type Cause string

// The causes.
const (
	CauseFailed  Cause = "failed"
	CauseOverdue Cause = "overdue"
)

// Suspicion is what is said of the units that were shown since the last pass of a master.
type Suspicion struct {
	Master string
	Cause  Cause
	Why    string
	Recipe string    // which units are meant where the master never passed: those judged by it
	At     time.Time // zero = now
}

// Suspect is an inspection that a master put in doubt. It stays one for ever: a later
// pass says nothing about the units before it.
type Suspect struct {
	Inspection // without evidence
	Master     string
	Cause      Cause
	Why        string
	At         time.Time
}

// MarkSuspects marks the units since the last pass of a master and returns how many were
// not marked before. A unit is since the pass when it was captured or judged after it, so
// that no clock and no order of arrival leaves one out. Only production and recheck count:
// what may ship.
func (s *Store) MarkSuspects(ctx context.Context, p MasterPlace, why Suspicion) (int, error) {
	if why.At.IsZero() {
		why.At = s.Now()
	}
	marked := 0
	err := s.write(ctx, func(tx *sql.Tx) (err error) {
		marked, err = markSuspects(ctx, tx, p, why)
		return err
	})
	return marked, err
}

func markSuspects(ctx context.Context, tx *sql.Tx, p MasterPlace, why Suspicion) (int, error) {
	args := p.args(why.Master, string(why.Cause), why.Why, micros(why.At), string(pipeline.Production), string(pipeline.Recheck))
	since, more := `recipe = $11`, []any{why.Recipe}
	switch pass, err := scanCheck(tx.QueryRowContext(ctx, lastCheckQuery, p.args(why.Master, string(CheckPass), "")...)); {
	case err == nil:
		since, more = `(judged_us > $11 OR counted_us > $12)`, []any{micros(pass.At), micros(pass.Counted)}
	case !errors.Is(err, sql.ErrNoRows):
		return 0, err
	}
	done, err := tx.ExecContext(ctx, `INSERT INTO suspects (inspection_id, master, cause, why, at_us)
		SELECT id, CAST($5 AS TEXT), CAST($6 AS TEXT), CAST($7 AS TEXT), CAST($8 AS BIGINT) FROM inspections
		WHERE `+wherePlace+` AND purpose IN ($9, $10) AND `+since+` ON CONFLICT DO NOTHING`, append(args, more...)...)
	if err != nil {
		return 0, err
	}
	n, err := done.RowsAffected()
	return int(n), err
}

// Suspects lists suspects, oldest mark first, and the page after this one, empty = none.
// Of the filter, Purpose is left aside.
func (s *Store) Suspects(ctx context.Context, f Filter, p Page) (list []Suspect, next string, err error) {
	f.AnyPurpose = true
	w, err := f.where()
	if err != nil {
		return nil, "", err
	}
	from, err := p.offset()
	if err != nil {
		return nil, "", err
	}
	columns := strings.Join(strings.Fields(inspectionColumns), " i.")
	err = each(ctx, s.reader, func(r *sql.Rows) error {
		one, err := scanSuspect(r)
		list = append(list, one)
		return err
	}, fmt.Sprintf(`SELECT i.%s, s.master, s.cause, s.why, s.at_us FROM suspects s JOIN inspections i ON i.id = s.inspection_id
		WHERE %s ORDER BY s.at_us, i.judged_us, s.inspection_id, s.master, s.cause LIMIT %d OFFSET %d`, columns, w, p.limit()+1, from), w.args...)
	if len(list) > p.limit() {
		list, next = list[:p.limit()], strconv.Itoa(from+p.limit())
	}
	return list, next, s.engine.classify(err)
}

func scanSuspect(r row) (Suspect, error) {
	var one Suspect
	var at int64
	var err error
	one.Inspection, err = scanInspection(r, &one.Master, &one.Cause, &one.Why, &at)
	one.At = fromMicros(at)
	return one, err
}

// suspicionsOf returns what puts an inspection in doubt, oldest first.
func (s *Store) suspicionsOf(ctx context.Context, id int64) ([]Suspicion, error) {
	var out []Suspicion
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		var one Suspicion
		var at int64
		err := r.Scan(&one.Master, &one.Cause, &one.Why, &at)
		one.At = fromMicros(at)
		out = append(out, one)
		return err
	}, `SELECT master, cause, why, at_us FROM suspects WHERE inspection_id = $1 ORDER BY at_us, master, cause`, id)
	return out, err
}

// offset is the page's start in a list that only grows at its end.
func (p Page) offset() (int, error) {
	if p.After == "" {
		return 0, nil
	}
	n, err := strconv.Atoi(p.After)
	if err != nil || n < 0 {
		return 0, pipeline.Invalid("page: got %q, want what the page before gave as next", p.After)
	}
	return n, nil
}

// last is the number of the last argument's placeholder.
func last(args []any) string { return strconv.Itoa(len(args)) }
