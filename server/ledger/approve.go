package ledger

import (
	"context"
	"database/sql"
	"errors"
	"strings"
	"time"

	"lapgate/pipeline"
)

// Effective says from when an approved recipe judges.
type Effective string

// From now on, or for lots that the station has not seen yet.
const (
	EffectiveNow     Effective = "now"
	EffectiveNextLot Effective = "next_lot"
)

// Approval is two people's word that a recipe may judge what ships.
type Approval struct {
	Hash             string // of the recipe's text
	Author, Approver string
	Reason           string
	Effective        Effective
	At               time.Time // zero = now
}

func (a Approval) check() error {
	if a.Effective != EffectiveNow && a.Effective != EffectiveNextLot {
		return pipeline.Invalid("effective: got %q, want now or next_lot", a.Effective)
	}
	if err := errors.Join(checkText("author", a.Author, maxPerson), checkText("person", a.Approver, maxPerson), checkText("reason", a.Reason, maxReason)); err != nil {
		return err
	}
	if samePerson(a.Author, a.Approver) {
		return pipeline.Invalid("person: got %q, who is the author: want a second person", a.Approver)
	}
	return nil
}

// samePerson compares names as people write them.
func samePerson(a, b string) bool {
	plain := func(s string) string { return strings.ToLower(strings.Join(strings.Fields(s), " ")) }
	return plain(a) == plain(b)
}

// Approve records an approval of a recipe that is on record, and returns it as recorded.
// The same one sent again, while it is the latest for the recipe's subject, changes nothing.
func (s *Store) Approve(ctx context.Context, a Approval) (Approval, error) {
	if err := a.check(); err != nil {
		return a, err
	}
	r, err := s.Recipe(ctx, a.Hash)
	if err != nil {
		return a, err
	}
	if a.At.IsZero() {
		a.At = s.Now()
	}
	a.At = toMicros(a.At)
	err = s.write(ctx, func(tx *sql.Tx) error {
		old, err := lastApproval(ctx, tx, r)
		if err != nil {
			return err
		}
		again := a
		if again.At = old.At; again == old {
			a = old
			return nil
		}
		_, err = tx.ExecContext(ctx, `INSERT INTO approvals (id, hash, author, approver, reason, effective, at_us) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
			newID(), a.Hash, a.Author, a.Approver, a.Reason, string(a.Effective), micros(a.At))
		return err
	})
	return a, err
}

// lastApproval returns the latest approval of any recipe for the same part, revision and
// surface; the zero value = none.
func lastApproval(ctx context.Context, tx *sql.Tx, r Recipe) (Approval, error) {
	var a Approval
	var at int64
	err := tx.QueryRowContext(ctx, `SELECT a.hash, a.author, a.approver, a.reason, a.effective, a.at_us FROM approvals a JOIN recipes r ON r.hash = a.hash
		WHERE r.part = $1 AND r.revision = $2 AND r.surface = $3 ORDER BY a.at_us DESC, a.id DESC LIMIT 1`, r.Part, r.Revision, r.Surface).
		Scan(&a.Hash, &a.Author, &a.Approver, &a.Reason, &a.Effective, &at)
	if errors.Is(err, sql.ErrNoRows) {
		return Approval{}, nil
	}
	a.At = fromMicros(at)
	return a, err
}

// Approved is an approval beside the recipe that it is of.
type Approved struct {
	Approval
	Recipe Recipe
}

// Approvals lists the approvals of a part's recipes, or of all, oldest first.
func (s *Store) Approvals(ctx context.Context, part string) ([]Approved, error) {
	w := &where{}
	if part != "" {
		w.add("r.part = %s", part)
	}
	var out []Approved
	err := each(ctx, s.reader, func(rows *sql.Rows) error {
		var a Approved
		var at, added int64
		r := &a.Recipe
		err := rows.Scan(&a.Hash, &a.Author, &a.Approver, &a.Reason, &a.Effective, &at,
			&r.Hash, &r.Part, &r.Revision, &r.Surface, &r.File, &r.Text, &added)
		a.At, r.Added = fromMicros(at), fromMicros(added)
		out = append(out, a)
		return err
	}, `SELECT a.hash, a.author, a.approver, a.reason, a.effective, a.at_us, r.hash, r.part, r.revision, r.surface, r.file, r.body, r.added_us
		FROM approvals a JOIN recipes r ON r.hash = a.hash WHERE `+w.String()+` ORDER BY a.at_us, a.id`, w.args...)
	return out, s.engine.classify(err)
}

// LotBegan returns when a lot of a part was first judged on a line and station; the zero
// time = not yet.
func (s *Store) LotBegan(ctx context.Context, part, lot, line, station string) (time.Time, error) {
	var us sql.NullInt64
	err := s.reader.QueryRowContext(ctx, `SELECT MIN(judged_us) FROM inspections WHERE part = $1 AND lot = $2 AND line = $3 AND station = $4`,
		part, lot, line, station).Scan(&us)
	if err != nil || !us.Valid {
		return time.Time{}, s.engine.classify(err)
	}
	return fromMicros(us.Int64), nil
}
