package ledger

import (
	"context"
	"database/sql"
	"errors"
	"math"

	"lapgate/pipeline"
)

// Repair recomputes every roll-up that no longer fits the inspections. Queries repair
// what they ask for themselves; a server may call Repair now and then so that they find
// little to do.
func (s *Store) Repair(ctx context.Context) error { return s.repair(ctx, 0, math.MaxInt64) }

func (s *Store) repair(ctx context.Context, fromUS, toUS int64) error {
	buckets, err := s.dirty(ctx, fromUS, toUS)
	if err != nil {
		return s.engine.classify(err)
	}
	for _, b := range buckets {
		t := newTally(b.us, b.us+bucketUS)
		if err := s.count(ctx, t); err != nil {
			return s.engine.classify(err)
		}
		if err := s.writeTally(ctx, b, t); err != nil {
			return err
		}
	}
	return nil
}

func (s *Store) writeTally(ctx context.Context, b dirtyBucket, t *tally) error {
	return s.write(ctx, func(tx *sql.Tx) error { return replaceBucket(ctx, tx, b, t) })
}

// replaceBucket writes a bucket's counts. The counts were taken after its mark was read:
// if the mark has changed since, the bucket stays dirty and is counted again; if the
// bucket is clean, another server was faster and knew at least as much.
func replaceBucket(ctx context.Context, tx *sql.Tx, b dirtyBucket, t *tally) error {
	var mark int64
	err := tx.QueryRowContext(ctx, `UPDATE dirty_buckets SET mark = mark WHERE bucket_us = $1 RETURNING mark`, b.us).Scan(&mark)
	if errors.Is(err, sql.ErrNoRows) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, query := range []string{`DELETE FROM rollup_verdicts WHERE bucket_us = $1`, `DELETE FROM rollup_reasons WHERE bucket_us = $1`} {
		if _, err := tx.ExecContext(ctx, query, b.us); err != nil {
			return err
		}
	}
	if err := insertTally(ctx, tx, b.us, t); err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `DELETE FROM dirty_buckets WHERE bucket_us = $1 AND mark = $2`, b.us, b.mark)
	return err
}

func insertTally(ctx context.Context, tx *sql.Tx, bucketUS int64, t *tally) error {
	for k, n := range t.verdicts {
		_, err := tx.ExecContext(ctx, `INSERT INTO rollup_verdicts (bucket_us, part, surface, process, lot, line, station, recipe, purpose, verdict,
			showings, first_pass, final, attempts, binned, first_binned, retest_accepts, permanent)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18)`,
			append(k.args(bucketUS), n.showings, n.first, n.final, n.attempts, n.binned, n.firstBinned, n.retestAccepts, n.permanent)...)
		if err != nil {
			return err
		}
	}
	for k, n := range t.reasons {
		_, err := tx.ExecContext(ctx, `INSERT INTO rollup_reasons (bucket_us, part, surface, process, lot, line, station, recipe, purpose, verdict,
			reason, showings, principal, first_showings, first_principal, removable)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16)`,
			append(k.args(bucketUS), k.reason, n.showings, n.principal, n.first, n.firstPrincipal, n.removable)...)
		if err != nil {
			return err
		}
	}
	return nil
}

func (k cellVerdict) args(bucketUS int64) []any {
	return []any{bucketUS, k.part, k.surface, k.process, k.lot, k.line, k.station, k.recipe, k.purpose, string(k.verdict)}
}

// count reads every showing of every unit that was shown within the tally's time.
func (s *Store) count(ctx context.Context, t *tally) error {
	var unit []rawShowing
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		raw, err := scanRaw(r)
		if err != nil {
			return err
		}
		if len(unit) > 0 && unit[0].unit != raw.unit {
			t.add(unit)
			unit = unit[:0]
		}
		unit = append(unit, raw)
		return nil
	}, countQuery, t.fromUS, t.toUS)
	if err == nil && len(unit) > 0 {
		t.add(unit)
	}
	return err
}

const countQuery = `SELECT i.id, i.part, i.lot, i.unit, i.surface, i.station, i.purpose, i.process, i.line, i.recipe,
	i.attempt, i.counted_us, i.verdict, COALESCE(d.decision, ''),
	COALESCE((SELECT o.bin FROM outcomes o WHERE o.inspection_id = i.id ORDER BY o.seq DESC LIMIT 1), ''),
	COALESCE(j.reasons, '[]'), COALESCE(g.permanent_verdict, ''), COALESCE(g.permanent_reasons, '[]')
	FROM (SELECT DISTINCT part, lot, unit, surface, station, purpose FROM inspections WHERE counted_us >= $1 AND counted_us < $2) u
	JOIN inspections i ON i.part = u.part AND i.lot = u.lot AND i.unit = u.unit AND i.surface = u.surface
		AND i.station = u.station AND i.purpose = u.purpose
	LEFT JOIN judgements j ON j.inspection_id = i.id AND j.seq = 0 AND i.verdict <> 'accept'
	LEFT JOIN dispositions d ON d.inspection_id = i.id
	LEFT JOIN registrations g ON g.inspection_id = i.id
	ORDER BY i.part, i.lot, i.unit, i.surface, i.station, i.purpose, i.attempt, i.counted_us, i.id`

func scanRaw(r *sql.Rows) (rawShowing, error) {
	var raw rawShowing
	var reasons, permanent string
	u, c := &raw.unit, &raw.cell
	err := r.Scan(&raw.id, &u.part, &u.lot, &u.unit, &u.surface, &u.station, &u.purpose, &c.process, &c.line, &c.recipe,
		&raw.attempt, &raw.countedUS, &raw.verdict, &raw.decision, &raw.bin, &reasons, &raw.permanent, &permanent)
	if err != nil {
		return raw, err
	}
	c.part, c.lot, c.surface, c.station, c.purpose = u.part, u.lot, u.surface, u.station, u.purpose
	if raw.reasons, err = reasonNames(reasons); err != nil {
		return raw, err
	}
	return raw, fromJSON("permanent reasons", permanent, &raw.permanentReasons)
}

// reasonNames returns the names of a judgement's reasons, each once, in order.
func reasonNames(text string) ([]string, error) {
	var reasons []pipeline.Reason
	if err := fromJSON("reasons", text, &reasons); err != nil {
		return nil, err
	}
	var names []string
	seen := map[string]bool{}
	for _, r := range reasons {
		if !seen[r.Name] {
			seen[r.Name] = true
			names = append(names, r.Name)
		}
	}
	return names, nil
}
