package ledger

import (
	"context"
	"database/sql"
	"errors"

	"lapgate/pipeline"
)

// Unit returns everything on record about a unit, oldest showing first, whatever the
// purpose: evidence, all judgements, disposition, all outcomes, masters that put it in doubt. An empty part finds the
// unit id under every part. None on record is an error of kind NotFoundKind.
func (s *Store) Unit(ctx context.Context, part, unit string) ([]Showing, error) {
	w := &where{}
	w.add("unit = %s", unit)
	if part != "" {
		w.add("part = %s", part)
	}
	var out []Showing
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		in, err := scanInspection(r)
		out = append(out, Showing{Inspection: in})
		return err
	}, `SELECT `+inspectionColumns+` FROM inspections WHERE `+w.String()+` ORDER BY counted_us, attempt, id`, w.args...)
	for i := range out {
		if err == nil {
			err = s.tell(ctx, &out[i])
		}
	}
	if err == nil && len(out) == 0 {
		err = pipeline.NotFound("unit %s: none on record for part %q", unit, part)
	}
	return out, s.engine.classify(err)
}

// allJudgements is more than any inspection has.
const allJudgements = 1 << 30

func (s *Store) tell(ctx context.Context, sh *Showing) error {
	err := s.complete(ctx, &sh.Inspection)
	if err != nil {
		return err
	}
	if sh.Judgements, err = judgementsOf(ctx, s.reader, sh.ID, allJudgements); err != nil {
		return err
	}
	if sh.Disposition, err = s.dispositionOf(ctx, sh.ID); err != nil {
		return err
	}
	if sh.Registration, err = s.registrationOf(ctx, sh.ID); err != nil {
		return err
	}
	if sh.Suspicions, err = s.suspicionsOf(ctx, sh.ID); err != nil {
		return err
	}
	return each(ctx, s.reader, func(r *sql.Rows) error {
		var o Outcome
		var confirmed, at, reported int64
		err := r.Scan(&o.Bin, &confirmed, &at, &reported)
		o.Confirmed, o.At, o.Reported = confirmed != 0, fromMicros(at), fromMicros(reported)
		sh.Outcomes = append(sh.Outcomes, o)
		return err
	}, `SELECT bin, confirmed, at_us, reported_us FROM outcomes WHERE inspection_id = $1 ORDER BY seq`, sh.ID)
}

func (s *Store) dispositionOf(ctx context.Context, id int64) (*Disposition, error) {
	var d Disposition
	var at int64
	err := s.reader.QueryRowContext(ctx, `SELECT decision, person, reason, at_us FROM dispositions WHERE inspection_id = $1`, id).
		Scan(&d.Decision, &d.Person, &d.Reason, &at)
	if errors.Is(err, sql.ErrNoRows) {
		return nil, nil
	}
	d.At = fromMicros(at)
	return &d, err
}
