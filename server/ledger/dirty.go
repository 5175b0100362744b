package ledger

import (
	"context"
	"database/sql"
	"fmt"
	"time"

	"lapgate/pipeline"
)

// Bucket is the width of a roll-up's bucket. Quarters of an hour serve every time zone
// and shifts that start at a quarter past.
const Bucket = 15 * time.Minute

const bucketUS = int64(Bucket / time.Microsecond)

// touch marks every bucket in which a showing of this unit counts: what is its first and
// what its last showing may have changed in all of them. The row it leaves and takes away
// in attempts_issued makes two transactions over one unit go one after the other, so the
// second sees the showing of the first; it also clears an attempt that is now on record.
func touch(ctx context.Context, tx *sql.Tx, id pipeline.Identity) error {
	k := keyOf(id)
	for _, step := range []struct {
		query string
		last  any
	}{
		{`INSERT INTO attempts_issued (part, lot, unit, surface, station, purpose, attempt) VALUES ($1, $2, $3, $4, $5, $6, $7)
			ON CONFLICT (part, lot, unit, surface, station, purpose) DO UPDATE SET attempt = attempts_issued.attempt`, id.Attempt},
		{fmt.Sprintf(`INSERT INTO dirty_buckets (bucket_us, mark)
			SELECT DISTINCT counted_us - counted_us %% %d, CAST($7 AS BIGINT) FROM inspections WHERE %s ORDER BY 1
			ON CONFLICT (bucket_us) DO UPDATE SET mark = excluded.mark`, bucketUS, whereStation), newID()},
		{`DELETE FROM attempts_issued WHERE ` + whereStation + ` AND attempt <= $7`, id.Attempt},
	} {
		if _, err := tx.ExecContext(ctx, step.query, k.args(step.last)...); err != nil {
			return err
		}
	}
	return nil
}

// dirtyBucket is a bucket that waits to be recomputed.
type dirtyBucket struct{ us, mark int64 }

func (s *Store) dirty(ctx context.Context, fromUS, toUS int64) ([]dirtyBucket, error) {
	var out []dirtyBucket
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		var d dirtyBucket
		err := r.Scan(&d.us, &d.mark)
		out = append(out, d)
		return err
	}, `SELECT bucket_us, mark FROM dirty_buckets WHERE bucket_us >= $1 AND bucket_us < $2 ORDER BY bucket_us`, fromUS, toUS)
	return out, err
}
