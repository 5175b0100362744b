package ledger

import (
	"context"
	"database/sql"
	"slices"
	"time"
)

// Latest returns the latest inspections of a station with their evidence but without the
// headers of their frames, oldest first, whatever their purpose.
func (s *Store) Latest(ctx context.Context, line, station string, most int) ([]Inspection, error) {
	out, err := s.withEvidence(ctx, `i.line = $1 AND i.station = $2 ORDER BY i.judged_us DESC, i.id DESC LIMIT $3`, line, station, most)
	slices.Reverse(out)
	return out, err
}

// Sample returns about as many inspections of a station since a time as are wanted, picked
// evenly and by chance (ids are random), as Latest does.
func (s *Store) Sample(ctx context.Context, line, station string, since time.Time, about int) ([]Inspection, error) {
	var n int64
	err := s.reader.QueryRowContext(ctx, `SELECT COUNT(*) FROM inspections WHERE line = $1 AND station = $2 AND judged_us >= $3`, line, station, micros(since)).Scan(&n)
	if err != nil {
		return nil, s.engine.classify(err)
	}
	shards := max(n/int64(max(about, 1)), 1)
	return s.withEvidence(ctx, `i.line = $1 AND i.station = $2 AND i.judged_us >= $3 AND i.id % $4 = 0 ORDER BY i.judged_us, i.id`, line, station, micros(since), shards)
}

// UnitsWithEvidence returns the last showing of every unit that a filter picks, newest first,
// most at most, with their evidence as Latest gives it; more says that there are others.
func (s *Store) UnitsWithEvidence(ctx context.Context, f Filter, most int) (list []Inspection, more bool, err error) {
	w, err := f.where()
	if err != nil {
		return nil, false, err
	}
	list, err = s.withEvidence(ctx, w.String()+` AND NOT `+later+` ORDER BY i.counted_us DESC, i.id DESC LIMIT `+placeholder(w, int64(most)+1), w.args...)
	if len(list) > most {
		list, more = list[:most], true
	}
	return list, more, err
}

func (s *Store) withEvidence(ctx context.Context, where string, args ...any) ([]Inspection, error) {
	var out []Inspection
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		var packed []byte
		in, err := scanInspection(r, &packed)
		if err != nil {
			return err
		}
		body, err := unzip(packed)
		if err == nil {
			err = fromJSON("evidence", body, &in.Evidence)
		}
		out = append(out, in)
		return err
	}, `SELECT `+inspectionColumns+`, e.body FROM inspections i JOIN evidence e ON e.inspection_id = i.id WHERE `+where, args...)
	return out, s.engine.classify(err)
}
