package ledger

import (
	"context"
	"database/sql"
)

// StationLatencies are the latencies of one line and station in ms, in rising order.
type StationLatencies struct {
	Line, Station string
	MS            []float64
}

// Latencies returns the latencies of the inspections that a filter picks, by line and
// station: from the last byte received to the verdict.
func (s *Store) Latencies(ctx context.Context, f Filter) ([]StationLatencies, error) {
	w, err := f.where()
	if err != nil {
		return nil, err
	}
	var out []StationLatencies
	err = each(ctx, s.reader, func(r *sql.Rows) error {
		var line, station string
		var ms float64
		if err := r.Scan(&line, &station, &ms); err != nil {
			return err
		}
		if n := len(out); n == 0 || out[n-1].Line != line || out[n-1].Station != station {
			out = append(out, StationLatencies{Line: line, Station: station})
		}
		at := &out[len(out)-1]
		at.MS = append(at.MS, ms)
		return nil
	}, `SELECT i.line, i.station, i.latency_ms FROM inspections i WHERE `+w.String()+` ORDER BY i.line, i.station, i.latency_ms`, w.args...)
	return out, s.engine.classify(err)
}
