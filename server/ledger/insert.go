package ledger

import (
	"context"
	"database/sql"

	"lapgate/pipeline"
)

const inspectionColumns = `id, part, revision, surface, process, lot, unit, line, station, attempt, purpose,
	digest, request_id, captured_us, counted_us, judged_us, clock, late, verdict, recipe, latency_ms`

func insert(ctx context.Context, tx *sql.Tx, in Inspection, t texts) error {
	_, err := tx.ExecContext(ctx, `INSERT INTO inspections (`+inspectionColumns+`)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20, $21)`,
		in.ID, in.Part, in.Revision, in.Surface, in.Process, in.Lot, in.Unit, in.Line, in.Station, in.Attempt, string(in.Purpose),
		in.Digest, in.RequestID, micros(in.Captured), micros(in.Counted), micros(in.Judged), string(in.Clock), flag(in.Late),
		string(in.Judgement.Verdict), in.Judgement.Recipe, in.LatencyMS)
	if err != nil {
		return err
	}
	if err := insertEvidence(ctx, tx, in, t); err != nil {
		return err
	}
	if err := insertJudgement(ctx, tx, in.ID, 0, in.Judgement); err != nil {
		return err
	}
	if in.Check != nil {
		if err := insertCheck(ctx, tx, in); err != nil {
			return err
		}
	}
	return touch(ctx, tx, in.Identity)
}

func insertEvidence(ctx context.Context, tx *sql.Tx, in Inspection, t texts) error {
	for i, v := range in.Evidence.Views {
		_, err := tx.ExecContext(ctx, `INSERT INTO views (inspection_id, ordinal, name, frames, calibration, coverage)
			VALUES ($1, $2, $3, $4, $5, $6)`, in.ID, i, v.Name, t.frames[i], v.Calibration, v.Coverage.Share)
		if err != nil {
			return err
		}
	}
	_, err := tx.ExecContext(ctx, `INSERT INTO evidence (inspection_id, body) VALUES ($1, $2)`, in.ID, t.evidence)
	return err
}

func insertJudgement(ctx context.Context, tx *sql.Tx, id, seq int64, j pipeline.Judgement) error {
	reasons, versions, err := encodeJudgement(j)
	if err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `INSERT INTO judgements (inspection_id, seq, made_by, person, verdict, reasons, recipe,
		detection_hash, judging_hash, program_version, stage_versions, at_us)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)`,
		id, seq, j.By, j.Person, string(j.Verdict), reasons, j.Recipe,
		j.DetectionHash, j.JudgingHash, j.ProgramVersion, versions, micros(j.At))
	return err
}

// nextSeq returns the number of the next row of a table that counts within an
// inspection: judgements or outcomes.
func nextSeq(ctx context.Context, tx *sql.Tx, table string, id int64) (int64, error) {
	var seq int64
	err := tx.QueryRowContext(ctx, `SELECT COALESCE(MAX(seq) + 1, 0) FROM `+table+` WHERE inspection_id = $1`, id).Scan(&seq)
	return seq, err
}
