package ledger

import (
	"context"
	"database/sql"

	"lapgate/pipeline"
)

// Judge adds a judgement by a candidate recipe or by judging anew. It changes neither the
// line's verdict nor any count.
func (s *Store) Judge(ctx context.Context, id int64, j pipeline.Judgement) error {
	if j.By != pipeline.ByCandidate && j.By != pipeline.ByRejudge {
		return pipeline.Invalid("judgement by: got %q, want %q or %q; a person closes a hold by a disposition",
			j.By, pipeline.ByCandidate, pipeline.ByRejudge)
	}
	if err := checkVerdict("verdict", j.Verdict); err != nil {
		return err
	}
	if j.At.IsZero() {
		j.At = s.Now()
	}
	return s.write(ctx, func(tx *sql.Tx) error {
		seq, err := nextSeq(ctx, tx, "judgements", id)
		if err != nil {
			return err
		}
		if seq == 0 {
			return pipeline.NotFound("inspection %d: not on record", id)
		}
		return insertJudgement(ctx, tx, id, seq, j)
	})
}
