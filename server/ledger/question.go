package ledger

import (
	"context"
	"database/sql"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"lapgate/pipeline"
)

// answer says which columns of a roll-up are wanted and where they go, row by row: the
// keys, then the sums.
type answer struct {
	table      string
	keys, sums []string
	into       []any
}

// ask repairs the roll-ups that a question touches, then calls take after each row.
func (s *Store) ask(ctx context.Context, q Question, a answer, take func(Group)) error {
	w, from, to, err := q.where()
	if err != nil {
		return err
	}
	if err := s.repair(ctx, from, to); err != nil {
		return err
	}
	groups := []string{q.start()}
	for _, d := range q.GroupBy {
		groups = append(groups, "i."+string(d))
	}
	by := strings.Join(append(groups, a.keys...), ", ")
	query := `SELECT ` + by
	for _, c := range a.sums {
		query += `, CAST(SUM(i.` + c + `) AS BIGINT)`
	}
	query += ` FROM ` + a.table + ` i WHERE ` + w.String() + ` GROUP BY ` + by + ` ORDER BY ` + by
	err = each(ctx, s.reader, func(r *sql.Rows) error {
		g, err := q.scan(r, a.into)
		if err == nil {
			take(g)
		}
		return err
	}, query, w.args...)
	return s.engine.classify(err)
}

// scan reads the group of a row, and the rest of the row into rest.
func (q Question) scan(r *sql.Rows, rest []any) (Group, error) {
	g := Group{Of: map[Dimension]string{}}
	values := make([]string, len(q.GroupBy))
	var start int64
	dest := []any{&start}
	for i := range values {
		dest = append(dest, &values[i])
	}
	err := r.Scan(append(dest, rest...)...)
	for i, d := range q.GroupBy {
		g.Of[d] = values[i]
	}
	if q.Every != 0 {
		g.Start = fromMicros(start)
	}
	return g, err
}

func (g Group) equal(h Group) bool { return g.Start.Equal(h.Start) && maps.Equal(g.Of, h.Of) }

// start returns the SQL of the start of a bucket's time group in µs, or 0 without groups.
func (q Question) start() string {
	if q.Every == 0 {
		return "i.bucket_us * 0"
	}
	every, origin := q.Every.Microseconds(), int64(0)
	if !q.Origin.IsZero() {
		origin = (micros(q.Origin)%every + every) % every
	}
	// Shifted by one group, so that the remainder is never that of a negative number.
	return fmt.Sprintf("(i.bucket_us - (i.bucket_us + %d) %% %d)", every-origin, every)
}

// where returns the conditions on a roll-up and the time they cover.
func (q Question) where() (w *where, fromUS, toUS int64, err error) {
	w, fromUS, toUS = &where{}, 0, math.MaxInt64
	if q.Unit != "" || q.Verdict != "" || q.NotJudgedBy != "" || q.Shards != 0 || q.Shard != 0 {
		return nil, 0, 0, pipeline.Invalid("counts: cannot be picked by unit, verdict, judgement or shard")
	}
	for _, d := range q.GroupBy {
		if !slices.Contains(Dimensions(), d) {
			return nil, 0, 0, pipeline.Invalid("group by: got %q, want some of %v", d, Dimensions())
		}
	}
	if q.Every < 0 || q.Every%Bucket != 0 {
		return nil, 0, 0, pipeline.Invalid("every: got %s, want a multiple of %s", q.Every, Bucket)
	}
	for _, t := range []struct {
		name string
		at   time.Time
		us   *int64
		test string
	}{{"from", q.From, &fromUS, ">="}, {"to", q.To, &toUS, "<"}, {"origin", q.Origin, new(int64), ""}} {
		if t.at.IsZero() {
			continue
		}
		*t.us = micros(t.at)
		if *t.us%bucketUS != 0 {
			return nil, 0, 0, pipeline.Invalid("%s: got %s, want a whole multiple of %s", t.name, t.at.Format(time.RFC3339Nano), Bucket)
		}
		if t.test != "" {
			w.add("i.bucket_us "+t.test+" %s", *t.us)
		}
	}
	q.dimensions(w)
	return w, fromUS, toUS, nil
}
