package ledger

import (
	"context"
	"database/sql"
	"encoding/json"
	"errors"
	"fmt"

	"lapgate/pipeline"
)

// Find returns the inspection with this identity, or an error of kind NotFoundKind.
func (s *Store) Find(ctx context.Context, id pipeline.Identity) (Inspection, error) {
	in, err := s.one(ctx, whereIdentity, identityArgs(id)...)
	return in, orMissing(err, "inspection: none on record for %s", describe(id))
}

// FindRequest returns the inspection that a client's request led to. It is how a resend
// of an unserialised unit, whose id the server gave, is known again.
func (s *Store) FindRequest(ctx context.Context, line, station, requestID string) (Inspection, error) {
	in, err := s.one(ctx, `request_id = $1 AND request_id <> '' AND line = $2 AND station = $3 ORDER BY judged_us DESC LIMIT 1`,
		requestID, line, station)
	return in, orMissing(err, "request %q: none on record for line %s, station %s", requestID, line, station)
}

// FindDigest returns the inspection of the same unit's surface at the same kind of
// station, whatever the attempt and the line, whose frames have this digest.
func (s *Store) FindDigest(ctx context.Context, id pipeline.Identity, digest string) (Inspection, error) {
	in, err := s.one(ctx, whereStation+` AND digest = $7 ORDER BY attempt DESC LIMIT 1`, keyOf(id).args(digest)...)
	return in, orMissing(err, "digest %s: none on record for part %s, unit %s", digest, id.Part, id.Unit)
}

// Inspection returns an inspection with its evidence and the line's judgement.
func (s *Store) Inspection(ctx context.Context, id int64) (Inspection, error) {
	in, err := s.one(ctx, `id = $1`, id)
	return in, orMissing(err, "inspection %d: not on record", id)
}

func orMissing(err error, format string, args ...any) error {
	if errors.Is(err, sql.ErrNoRows) {
		return pipeline.NotFound(format, args...)
	}
	return err
}

func (s *Store) one(ctx context.Context, where string, args ...any) (Inspection, error) {
	in, err := scanInspection(s.reader.QueryRowContext(ctx, `SELECT `+inspectionColumns+` FROM inspections WHERE `+where, args...))
	if err == nil {
		err = s.complete(ctx, &in)
	}
	return in, s.engine.classify(err)
}

type row interface{ Scan(dest ...any) error }

// scanInspection reads inspectionColumns, and into more what stands behind them.
func scanInspection(r row, more ...any) (Inspection, error) {
	var in Inspection
	var captured, counted, judged, late int64
	err := r.Scan(append([]any{&in.ID, &in.Part, &in.Revision, &in.Surface, &in.Process, &in.Lot, &in.Unit, &in.Line, &in.Station,
		&in.Attempt, &in.Purpose, &in.Digest, &in.RequestID, &captured, &counted, &judged, &in.Clock, &late,
		&in.Judgement.Verdict, &in.Judgement.Recipe, &in.LatencyMS}, more...)...)
	in.Captured, in.Counted, in.Judged, in.Late = fromMicros(captured), fromMicros(counted), fromMicros(judged), late != 0
	return in, err
}

// complete reads what stands in other tables: evidence, frames, the line's judgement.
func (s *Store) complete(ctx context.Context, in *Inspection) error {
	var packed []byte
	if err := s.reader.QueryRowContext(ctx, `SELECT body FROM evidence WHERE inspection_id = $1`, in.ID).Scan(&packed); err != nil {
		return err
	}
	body, err := unzip(packed)
	if err != nil {
		return fmt.Errorf("inspection %d: stored evidence: %w", in.ID, err)
	}
	if err := fromJSON("evidence", body, &in.Evidence); err != nil {
		return err
	}
	err = each(ctx, s.reader, func(r *sql.Rows) error {
		var ordinal int
		var frames string
		if err := r.Scan(&ordinal, &frames); err != nil {
			return err
		}
		if ordinal >= len(in.Evidence.Views) {
			return fmt.Errorf("inspection %d: view %d has frames but no evidence", in.ID, ordinal)
		}
		return fromJSON("frames", frames, &in.Evidence.Views[ordinal].Frames)
	}, `SELECT ordinal, frames FROM views WHERE inspection_id = $1 ORDER BY ordinal`, in.ID)
	if err != nil {
		return err
	}
	all, err := judgementsOf(ctx, s.reader, in.ID, 1)
	if err == nil && len(all) == 1 {
		in.Judgement = all[0]
	}
	return err
}

// judgementsOf returns the first most judgements of an inspection, the line's first.
func judgementsOf(ctx context.Context, q queryer, id int64, most int) ([]pipeline.Judgement, error) {
	var out []pipeline.Judgement
	err := each(ctx, q, func(r *sql.Rows) error {
		var j pipeline.Judgement
		var reasons, versions string
		var at int64
		if err := r.Scan(&j.By, &j.Person, &j.Verdict, &reasons, &j.Recipe, &j.DetectionHash, &j.JudgingHash,
			&j.ProgramVersion, &versions, &at); err != nil {
			return err
		}
		j.At = fromMicros(at)
		out = append(out, j)
		last := &out[len(out)-1]
		if err := fromJSON("reasons", reasons, &last.Reasons); err != nil {
			return err
		}
		return fromJSON("stage_versions", versions, &last.StageVersions)
	}, `SELECT made_by, person, verdict, reasons, recipe, detection_hash, judging_hash, program_version, stage_versions, at_us
		FROM judgements WHERE inspection_id = $1 ORDER BY seq LIMIT $2`, id, most)
	return out, err
}

func fromJSON(what, text string, into any) error {
	if err := json.Unmarshal([]byte(text), into); err != nil {
		return fmt.Errorf("ledger: stored %s cannot be read: %w", what, err)
	}
	return nil
}
