package ledger

import (
	"context"
	"database/sql"
	"fmt"
	"strings"
	"time"

	"lapgate/pipeline"
)

// Page says which part of a list is wanted.
type Page struct {
	Limit int    // showings at most; 0 = 100, at most 1000
	After string // Next of the page before; empty = from the newest
}

const (
	defaultLimit = 100
	maxLimit     = 1000
)

// Showing is an inspection with what became of it. In lists Evidence is empty, Judgements
// holds the line's verdict, recipe and reasons alone, and Outcomes the last report alone.
type Showing struct {
	Inspection
	Judgements  []pipeline.Judgement
	Disposition *Disposition
	Outcomes    []Outcome
	Suspicions  []Suspicion // in the story of a unit alone
	// Registration is how it lies to the showing before, in the story of a unit alone.
	Registration *Registration
}

// Showings is one page of a list, newest first.
type Showings struct {
	List []Showing
	Next string // for Page.After; empty = this was the last page
}

const later = `EXISTS (SELECT 1 FROM inspections l WHERE l.part = i.part AND l.lot = i.lot AND l.unit = i.unit
	AND l.surface = i.surface AND l.station = i.station AND l.purpose = i.purpose AND (l.attempt > i.attempt
	OR l.attempt = i.attempt AND (l.counted_us > i.counted_us OR l.counted_us = i.counted_us AND l.id > i.id)))`

// Showings lists every showing.
func (s *Store) Showings(ctx context.Context, f Filter, p Page) (Showings, error) {
	return s.list(ctx, f, p)
}

// Units lists the last showing of every unit's surface at each kind of station.
func (s *Store) Units(ctx context.Context, f Filter, p Page) (Showings, error) {
	return s.list(ctx, f, p, `NOT `+later)
}

// OpenHolds lists the holds that nobody has closed and no later attempt has overtaken.
func (s *Store) OpenHolds(ctx context.Context, f Filter, p Page) (Showings, error) {
	return s.list(ctx, f, p, `i.verdict = 'hold'`, `d.decision IS NULL`, `NOT `+later)
}

// Mismatches lists showings after which the line did something else than the verdict
// said, or could not confirm it. A hold in the reject bin is no mismatch: it is the rule
// of a line without a third bin.
func (s *Store) Mismatches(ctx context.Context, f Filter, p Page) (Showings, error) {
	return s.list(ctx, f, p, `i.id IN (SELECT b.inspection_id FROM outcomes b WHERE b.mismatch = 1)`, `o.mismatch = 1`)
}

func (s *Store) list(ctx context.Context, f Filter, p Page, more ...string) (Showings, error) {
	w, err := f.where()
	if err != nil {
		return Showings{}, err
	}
	w.conditions = append(w.conditions, more...)
	if err := p.after(w); err != nil {
		return Showings{}, err
	}
	limit := p.limit()
	var out Showings
	err = each(ctx, s.reader, func(r *sql.Rows) error {
		sh, err := scanShowing(r)
		out.List = append(out.List, sh)
		return err
	}, listQuery(w.String(), limit+1), w.args...)
	if len(out.List) > limit {
		out.List = out.List[:limit]
		last := out.List[limit-1]
		out.Next = fmt.Sprintf("%d.%d", micros(last.Counted), last.ID)
	}
	return out, s.engine.classify(err)
}

func listQuery(where string, limit int) string {
	columns := strings.Fields(inspectionColumns)
	return fmt.Sprintf(`SELECT i.%s, j.reasons, COALESCE(d.decision, ''), COALESCE(d.person, ''), COALESCE(d.reason, ''), COALESCE(d.at_us, 0),
		COALESCE(o.bin, ''), COALESCE(o.confirmed, 0), COALESCE(o.at_us, 0), COALESCE(o.reported_us, 0)
		FROM inspections i JOIN judgements j ON j.inspection_id = i.id AND j.seq = 0
		LEFT JOIN dispositions d ON d.inspection_id = i.id
		LEFT JOIN outcomes o ON o.inspection_id = i.id AND o.seq = (SELECT MAX(m.seq) FROM outcomes m WHERE m.inspection_id = i.id)
		WHERE %s ORDER BY i.counted_us DESC, i.id DESC LIMIT %d`, strings.Join(columns, " i."), where, limit)
}

func scanShowing(r *sql.Rows) (Showing, error) {
	var reasons string
	var d Disposition
	var o Outcome
	var disposed, confirmed, at, reported int64
	in, err := scanInspection(r, &reasons, &d.Decision, &d.Person, &d.Reason, &disposed, &o.Bin, &confirmed, &at, &reported)
	sh := Showing{Inspection: in}
	if err != nil {
		return sh, err
	}
	sh.Judgement.By, sh.Judgement.At = pipeline.ByLine, in.Judged
	if err := fromJSON("reasons", reasons, &sh.Judgement.Reasons); err != nil {
		return sh, err
	}
	sh.Judgements = []pipeline.Judgement{sh.Judgement}
	if d.Decision != "" {
		d.At = fromMicros(disposed)
		sh.Disposition = &d
	}
	if o.Bin != "" {
		o.Confirmed, o.At, o.Reported = confirmed != 0, fromMicros(at), fromMicros(reported)
		sh.Outcomes = []Outcome{o}
	}
	return sh, nil
}

func (p Page) limit() int {
	if p.Limit <= 0 {
		return defaultLimit
	}
	return min(p.Limit, maxLimit)
}

func (p Page) after(w *where) error {
	if p.After == "" {
		return nil
	}
	var us, id int64
	if n, err := fmt.Sscanf(p.After, "%d.%d", &us, &id); err != nil || n != 2 || time.UnixMicro(us).Year() > 9999 {
		return pipeline.Invalid("page: got %q, want what the page before gave as next", p.After)
	}
	w.add("(i.counted_us < %s OR i.counted_us = %s AND i.id < %s)", us, us, id)
	return nil
}
