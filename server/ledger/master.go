package ledger

import (
	"context"
	"database/sql"
	"time"

	"lapgate/pipeline"
)

// CheckResult is what a showing of a master proved.
type CheckResult string

// The results. A void check proves nothing either way: its frames did not arrive whole,
// a stage failed, or it was late.
const (
	CheckPass CheckResult = "pass"
	CheckFail CheckResult = "fail"
	CheckVoid CheckResult = "void"
)

// MasterPlace is where a master speaks for the units: one surface of a part at one station.
type MasterPlace struct{ Part, Surface, Line, Station string }

// PlaceOf returns the place of a showing.
func PlaceOf(id pipeline.Identity) MasterPlace {
	return MasterPlace{id.Part, id.Surface, id.Line, id.Station}
}

func (p MasterPlace) args(more ...any) []any {
	return append([]any{p.Part, p.Surface, p.Line, p.Station}, more...)
}

const wherePlace = `part = $1 AND surface = $2 AND line = $3 AND station = $4`

// MasterCheck is one showing of a master held against what its recipe expects.
type MasterCheck struct {
	InspectionID int64 // given by the ledger, like all down to Verdict
	MasterPlace
	Master           string // its unit id
	Recipe           string // text hash
	At, Counted      time.Time
	Verdict          pipeline.Verdict
	View             string
	Kind             pipeline.Kind
	Expected         pipeline.Verdict
	Result           CheckResult
	Why              string // a sentence for a person
	Measure          string // which measure of the master's defect Value is
	Value, Low, High *float64
	Conditions       map[string]string // what the showing was made with, such as calibrations
}

// of fills what the inspection knows.
func (c MasterCheck) of(in Inspection) MasterCheck {
	c.InspectionID, c.MasterPlace, c.Master = in.ID, PlaceOf(in.Identity), in.Unit
	c.Recipe, c.Verdict, c.At, c.Counted = in.Judgement.Recipe, in.Judgement.Verdict, in.Judged, in.Counted
	return c
}

const checkColumns = `inspection_id, part, surface, line, station, master, view, kind, expected, verdict, result, why,
	measure, value, low, high, recipe, conditions, at_us, counted_us`

// insertCheck records a check; one that failed makes the units since the last pass suspect.
func insertCheck(ctx context.Context, tx *sql.Tx, in Inspection) error {
	c := in.Check.of(in)
	conditions, err := toJSON("conditions", c.Conditions)
	if err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `INSERT INTO master_checks (`+checkColumns+`)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20)`,
		c.InspectionID, c.Part, c.Surface, c.Line, c.Station, c.Master, c.View, string(c.Kind), string(c.Expected), string(c.Verdict),
		string(c.Result), c.Why, c.Measure, c.Value, c.Low, c.High, c.Recipe, conditions, micros(c.At), micros(c.Counted))
	if err != nil || c.Result != CheckFail {
		return err
	}
	_, err = markSuspects(ctx, tx, c.MasterPlace, Suspicion{Master: c.Master, Cause: CauseFailed, Why: c.Why, Recipe: c.Recipe, At: c.At})
	return err
}

// LastCheck returns the latest check of a master at a place that had the result, by the
// recipe with this text hash or by any (empty), or an error of kind NotFoundKind.
func (s *Store) LastCheck(ctx context.Context, p MasterPlace, master string, result CheckResult, recipe string) (MasterCheck, error) {
	c, err := scanCheck(s.lastCheck.QueryRowContext(ctx, p.args(master, string(result), recipe)...))
	return c, s.engine.classify(orMissing(err, "master %s: no %s on record for part %s on line %s, station %s", master, result, p.Part, p.Line, p.Station))
}

// lastCheckQuery has the arguments of a place, the master, the result and a recipe or "".
const lastCheckQuery = `SELECT ` + checkColumns + ` FROM master_checks WHERE ` + wherePlace +
	` AND master = $5 AND result = $6 AND (CAST($7 AS TEXT) = '' OR recipe = $7) ORDER BY at_us DESC, inspection_id DESC LIMIT 1`

func scanCheck(r row) (MasterCheck, error) {
	var c MasterCheck
	var conditions string
	var at, counted int64
	err := r.Scan(&c.InspectionID, &c.Part, &c.Surface, &c.Line, &c.Station, &c.Master, &c.View, &c.Kind, &c.Expected, &c.Verdict, &c.Result,
		&c.Why, &c.Measure, &c.Value, &c.Low, &c.High, &c.Recipe, &conditions, &at, &counted)
	if err != nil {
		return c, err
	}
	c.At, c.Counted = fromMicros(at), fromMicros(counted)
	return c, fromJSON("conditions", conditions, &c.Conditions)
}

// CheckFilter picks checks; an empty field picks all.
type CheckFilter struct {
	Part, Line, Station, Master string
	From, To                    time.Time // of judging; To is excluded
}

// Checks lists checks, newest first, at most as many as limit says (0 = 100).
func (s *Store) Checks(ctx context.Context, f CheckFilter, limit int) ([]MasterCheck, error) {
	w := &where{}
	for _, d := range []struct{ column, value string }{{"part", f.Part}, {"line", f.Line}, {"station", f.Station}, {"master", f.Master}} {
		if d.value != "" {
			w.add(d.column+" = %s", d.value)
		}
	}
	if !f.From.IsZero() {
		w.add("at_us >= %s", micros(f.From))
	}
	if !f.To.IsZero() {
		w.add("at_us < %s", micros(f.To))
	}
	w.args = append(w.args, Page{Limit: limit}.limit())
	var out []MasterCheck
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		c, err := scanCheck(r)
		out = append(out, c)
		return err
	}, `SELECT `+checkColumns+` FROM master_checks WHERE `+w.String()+` ORDER BY at_us DESC, inspection_id DESC LIMIT $`+last(w.args), w.args...)
	return out, s.engine.classify(err)
}

// MasterPlaces lists where masters of a part were shown.
func (s *Store) MasterPlaces(ctx context.Context, part string) ([]MasterPlace, error) {
	var out []MasterPlace
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		p := MasterPlace{Part: part}
		err := r.Scan(&p.Surface, &p.Line, &p.Station)
		out = append(out, p)
		return err
	}, `SELECT DISTINCT surface, line, station FROM master_checks WHERE part = $1 ORDER BY line, station, surface`, part)
	return out, s.engine.classify(err)
}
