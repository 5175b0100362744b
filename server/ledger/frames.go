package ledger

import (
	"context"
	"database/sql"
	"slices"

	"lapgate/pipeline"
)

// FramesBefore returns the headers of the latest frames that a station showed in a view,
// most at most, oldest first: what a picture must differ from to be a new one.
func (s *Store) FramesBefore(ctx context.Context, line, station, view string, most int) ([]pipeline.FrameHeader, error) {
	var out []pipeline.FrameHeader
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		var text string
		if err := r.Scan(&text); err != nil {
			return err
		}
		var frames []pipeline.FrameEvidence
		if err := fromJSON("frames", text, &frames); err != nil {
			return err
		}
		for _, f := range slices.Backward(frames) {
			if len(out) < most {
				out = append(out, f.Header)
			}
		}
		return nil
	}, `SELECT v.frames FROM inspections i JOIN views v ON v.inspection_id = i.id
		WHERE i.line = $1 AND i.station = $2 AND v.name = $3 ORDER BY i.judged_us DESC, i.id DESC LIMIT $4`, line, station, view, most)
	slices.Reverse(out)
	return out, s.engine.classify(err)
}
