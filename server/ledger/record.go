package ledger

import (
	"context"
	"crypto/rand"
	"database/sql"
	"encoding/binary"
	"encoding/json"
	"errors"

	"lapgate/pipeline"
)

// Record writes an inspection in one transaction. When it returns without error, the
// record is on disk and the verdict may be answered. An identity that is on record with
// the same digest is a resend: the stored inspection comes back, fresh is false, and
// nothing is written. With another digest it is an error of kind pipeline.Conflict.
func (s *Store) Record(ctx context.Context, in Inspection) (stored Inspection, fresh bool, err error) {
	if err := in.prepare(s.Now()); err != nil {
		return Inspection{}, false, err
	}
	texts, err := encode(in)
	if err != nil {
		return Inspection{}, false, err
	}
	var earlier int64
	err = s.write(ctx, func(tx *sql.Tx) error {
		earlier, err = findResend(ctx, tx, in)
		if err != nil || earlier != 0 {
			return err
		}
		in.ID = newID()
		return insert(ctx, tx, in, texts)
	})
	if err != nil {
		return Inspection{}, false, err
	}
	if earlier != 0 {
		stored, err = s.Inspection(ctx, earlier)
		return stored, false, err
	}
	return in, true, nil
}

// findResend returns the id of the inspection that in repeats, or 0.
func findResend(ctx context.Context, q queryer, in Inspection) (int64, error) {
	var id int64
	var digest string
	err := q.QueryRowContext(ctx, `SELECT id, digest FROM inspections WHERE `+whereIdentity, identityArgs(in.Identity)...).Scan(&id, &digest)
	if errors.Is(err, sql.ErrNoRows) {
		return 0, nil
	}
	if err == nil && digest != in.Digest {
		return 0, pipeline.Fail(pipeline.Conflict, "%s: other frames are on record for %s: "+
			"if the unit was shown again, send it as the next attempt; if a counter restarted, give the lot or the unit another id",
			pipeline.ReasonConflict, describe(in.Identity))
	}
	return id, err
}

const whereIdentity = whereStation + ` AND attempt = $7 AND line = $8`

func identityArgs(id pipeline.Identity) []any { return keyOf(id).args(id.Attempt, id.Line) }

// newID returns a random positive number. Should it ever be taken, the insert fails and
// a resend gets another one.
func newID() int64 {
	var b [8]byte
	_, _ = rand.Read(b[:]) // never fails since Go 1.24
	return max(1, int64(binary.LittleEndian.Uint64(b[:])>>1))
}

// texts are the JSON columns of an inspection.
type texts struct {
	frames                 []string // one for each view
	evidence               []byte   // gzip
	reasons, stageVersions string
}

func encode(in Inspection) (texts, error) {
	var t texts
	body := in.Evidence
	body.Views = append([]pipeline.ViewEvidence(nil), in.Evidence.Views...)
	for i := range body.Views {
		if err := checkFormats(body.Views[i]); err != nil {
			return t, err
		}
		text, err := toJSON("frames", body.Views[i].Frames)
		if err != nil {
			return t, err
		}
		t.frames = append(t.frames, text)
		body.Views[i].Frames = nil
	}
	text, err := toJSON("evidence", body)
	if err != nil {
		return t, err
	}
	if t.evidence, err = zip(text); err != nil {
		return t, err
	}
	t.reasons, t.stageVersions, err = encodeJudgement(in.Judgement)
	return t, err
}

// checkFormats refuses a pixel format that could be written but not read again.
func checkFormats(v pipeline.ViewEvidence) error {
	for i, f := range v.Frames {
		if !f.Header.Format.Known() {
			return pipeline.Invalid("view %s, frame %d: pixel_format: got %s, want one that is understood", v.Name, i, f.Header.Format)
		}
	}
	return nil
}

func encodeJudgement(j pipeline.Judgement) (reasons, stageVersions string, err error) {
	if reasons, err = toJSON("reasons", j.Reasons); err != nil {
		return "", "", err
	}
	stageVersions, err = toJSON("stage_versions", j.StageVersions)
	return reasons, stageVersions, err
}

func toJSON(what string, v any) (string, error) {
	b, err := json.Marshal(v)
	if err != nil {
		return "", pipeline.Invalid("%s: cannot be kept (%w): every number must be finite; the stage that measured it must say so as a failure", what, err)
	}
	return string(b), nil
}
