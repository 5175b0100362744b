package ledger

import (
	"context"
	"database/sql"
	"time"
)

// Alarm is something about a station that no single unit shows.
type Alarm struct {
	ID                  int64  // given by the ledger
	Name                string // such as pipeline.ReasonDirt
	Line, Station, View string
	XPx, YPx            float64  // in the camera's frame as received
	Units               []string // that showed it, oldest first
	Text                string
	RaisedBy, ClearedBy int64 // inspections; ClearedBy 0 = it is open
	Raised, Cleared     time.Time
}

// Open reports whether the alarm has not been cleared.
func (a Alarm) Open() bool { return a.Cleared.IsZero() }

// RaiseAlarm records an alarm and returns it with its id.
func (s *Store) RaiseAlarm(ctx context.Context, a Alarm) (Alarm, error) {
	if a.Raised.IsZero() {
		a.Raised = s.Now()
	}
	units, err := toJSON("units", a.Units)
	if err != nil {
		return a, err
	}
	a.ID, a.Raised = newID(), toMicros(a.Raised)
	return a, s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO alarms (id, name, line, station, view, x_px, y_px, units, detail, raised_by, raised_us, cleared_by, cleared_us)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, 0, 0)`,
			a.ID, a.Name, a.Line, a.Station, a.View, a.XPx, a.YPx, units, a.Text, a.RaisedBy, micros(a.Raised))
		return err
	})
}

// ClearAlarm closes an alarm; one that is closed already stays as it is.
func (s *Store) ClearAlarm(ctx context.Context, id, by int64, at time.Time) error {
	return s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `UPDATE alarms SET cleared_by = $1, cleared_us = $2 WHERE id = $3 AND cleared_us = 0`, by, micros(at), id)
		return err
	})
}

// AlarmFilter picks alarms; an empty field picks all.
type AlarmFilter struct {
	Line, Station string
	OpenOnly      bool
}

// Alarms lists alarms, newest first, most at most; 0 = 100.
func (s *Store) Alarms(ctx context.Context, f AlarmFilter, most int) ([]Alarm, error) {
	w := &where{}
	if f.Line != "" {
		w.add("line = %s", f.Line)
	}
	if f.Station != "" {
		w.add("station = %s", f.Station)
	}
	if f.OpenOnly {
		w.conditions = append(w.conditions, "cleared_us = 0")
	}
	var out []Alarm
	err := each(ctx, s.reader, func(r *sql.Rows) error {
		a, err := scanAlarm(r)
		out = append(out, a)
		return err
	}, `SELECT id, name, line, station, view, x_px, y_px, units, detail, raised_by, raised_us, cleared_by, cleared_us FROM alarms
		WHERE `+w.String()+` ORDER BY raised_us DESC, id DESC LIMIT `+placeholder(w, int64(Page{Limit: most}.limit())), w.args...)
	return out, s.engine.classify(err)
}

// placeholder adds a value and returns its placeholder.
func placeholder(w *where, v any) string {
	w.args = append(w.args, v)
	return "$" + last(w.args)
}

func scanAlarm(r row) (Alarm, error) {
	var a Alarm
	var units string
	var raised, cleared int64
	if err := r.Scan(&a.ID, &a.Name, &a.Line, &a.Station, &a.View, &a.XPx, &a.YPx, &units, &a.Text, &a.RaisedBy, &raised, &a.ClearedBy, &cleared); err != nil {
		return a, err
	}
	a.Raised = fromMicros(raised)
	if cleared != 0 {
		a.Cleared = fromMicros(cleared)
	}
	return a, fromJSON("units", units, &a.Units)
}
