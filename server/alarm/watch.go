package alarm

import (
	"context"
	"fmt"
	"log/slog"
	"slices"
	"strings"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Settings say what raises an alarm.
type Settings struct {
	Units       int     // successive units with a defect at one place raise it, as many without one clear it; 0 = no alarm
	TolerancePx float64 // how far apart places may lie
	Hold        bool    // units of a station with an open alarm are held
	// DriftEvery is how old an answer about drift may be; 0 = none is kept.
	DriftEvery time.Duration
}

// Gate is what stands before the watch; see intake.Gate.
type Gate interface {
	Enter(ctx context.Context, id pipeline.Identity, r *pipeline.Recipe, conditions map[string]string) (holds []pipeline.Failure, leave func(), err error)
	Check(r *pipeline.Recipe, in ledger.Inspection, conditions map[string]string) *ledger.MasterCheck
}

// Watch raises and clears alarms as inspections are recorded. It is a Gate itself. Set its
// fields before first use; it is then safe for concurrent use.
type Watch struct {
	Settings Settings
	Ledger   *ledger.Store
	Inner    Gate // asked first; nil = none
	Now      func() time.Time
	Log      *slog.Logger

	mu       sync.Mutex // guards stations and events
	stations map[place]*station
	events   []event
	drifts   driftCache
}

type place struct{ line, station string }

// station is what is remembered of one.
type station struct {
	mu     sync.Mutex // guards what is below
	loaded bool
	views  map[string]*memory
	open   []ledger.Alarm
}

// event is an alarm that an inspection raised or cleared.
type event struct {
	inspection int64
	alarm      ledger.Alarm
}

// mostEvents is how many events are remembered for those who watch.
const mostEvents = 256

// mostStations is how many stations are remembered; names come from clients. What is known
// of any other is read from the ledger each time.
const mostStations = 4096

func (w *Watch) at(p place) *station {
	w.mu.Lock()
	defer w.mu.Unlock()
	if w.stations == nil {
		w.stations = map[place]*station{}
	}
	s := w.stations[p]
	if s == nil {
		s = &station{views: map[string]*memory{}}
		if len(w.stations) < mostStations {
			w.stations[p] = s
		}
	}
	return s
}

// Enter implements Gate.
func (w *Watch) Enter(ctx context.Context, id pipeline.Identity, r *pipeline.Recipe, conditions map[string]string) (holds []pipeline.Failure, leave func(), err error) {
	leave = func() {}
	if w.Inner != nil {
		if holds, leave, err = w.Inner.Enter(ctx, id, r, conditions); err != nil {
			return nil, nil, err
		}
	}
	if w.Settings.Units == 0 {
		return holds, leave, nil
	}
	s := w.at(place{id.Line, id.Station})
	s.mu.Lock()
	defer s.mu.Unlock()
	if err := w.load(ctx, s, id.Line, id.Station); err != nil {
		leave()
		return nil, nil, err
	}
	if w.Settings.Hold && (id.Purpose == pipeline.Production || id.Purpose == pipeline.Recheck) {
		for _, a := range s.open {
			holds = append(holds, pipeline.Failure{Reason: a.Name, View: a.View, Detail: a.Text})
		}
	}
	return holds, leave, nil
}

// Check implements Gate.
func (w *Watch) Check(r *pipeline.Recipe, in ledger.Inspection, conditions map[string]string) *ledger.MasterCheck {
	if w.Inner == nil {
		return nil
	}
	return w.Inner.Check(r, in, conditions)
}

// load takes up what is on record of a station that was not heard of since the start. The
// caller holds s.mu.
func (w *Watch) load(ctx context.Context, s *station, line, name string) error {
	if s.loaded {
		return nil
	}
	list, err := w.Ledger.Latest(ctx, line, name, depthOf(w.Settings.Units))
	if err != nil {
		return err
	}
	if s.open, err = w.Ledger.Alarms(ctx, ledger.AlarmFilter{Line: line, Station: name, OpenOnly: true}, 0); err != nil {
		return err
	}
	for _, in := range list {
		w.add(s, in)
	}
	s.loaded = true
	if len(list) > 0 { // an alarm that a crash kept from the ledger
		w.update(ctx, s, list[len(list)-1])
	}
	return nil
}

// add keeps the sights of an inspection. The caller holds s.mu.
func (w *Watch) add(s *station, in ledger.Inspection) {
	for _, v := range in.Evidence.Views {
		if seen, ok := sightOf(in, v); ok {
			if s.views[v.Name] == nil {
				s.views[v.Name] = &memory{}
			}
			s.views[v.Name].add(seen, depthOf(w.Settings.Units))
		}
	}
}

// writeTimeout bounds what an alarm's record may take.
const writeTimeout = 5 * time.Second

// Recorded takes an inspection that the ledger has. It writes to the ledger only when an
// alarm is raised or cleared.
func (w *Watch) Recorded(in ledger.Inspection) {
	if w == nil || w.Settings.Units == 0 {
		return
	}
	s := w.at(place{in.Line, in.Station})
	s.mu.Lock()
	defer s.mu.Unlock()
	if !s.loaded { // it will be taken up with the rest
		return
	}
	ctx, cancel := context.WithTimeout(context.Background(), writeTimeout)
	defer cancel()
	w.add(s, in)
	w.update(ctx, s, in)
}

// update raises and clears alarms after an inspection. The caller holds s.mu.
func (w *Watch) update(ctx context.Context, s *station, in ledger.Inspection) {
	n, tolerance := w.Settings.Units, w.Settings.TolerancePx
	s.open = slices.DeleteFunc(s.open, func(a ledger.Alarm) bool {
		m := s.views[a.View]
		if m == nil || !m.clean(pipeline.Point{X: a.XPx, Y: a.YPx}, n, tolerance) {
			return false
		}
		a.Cleared, a.ClearedBy = w.Now(), in.ID
		if err := w.Ledger.ClearAlarm(ctx, a.ID, in.ID, a.Cleared); err != nil {
			w.Log.Error("an alarm cannot be cleared in the ledger", "alarm", a.Text, "error", err)
			return false
		}
		w.note(in.ID, a)
		return true
	})
	for view, m := range s.views {
		for {
			at, units, ok := m.stays(n, tolerance, func(p pipeline.Point) bool { return known(s.open, view, p, tolerance) })
			if !ok || !w.raise(ctx, s, in, view, at, units) {
				break
			}
		}
	}
}

func known(open []ledger.Alarm, view string, p pipeline.Point, tolerancePx float64) bool {
	return slices.ContainsFunc(open, func(a ledger.Alarm) bool {
		return a.View == view && distance(p, pipeline.Point{X: a.XPx, Y: a.YPx}) <= 2*tolerancePx
	})
}

func (w *Watch) raise(ctx context.Context, s *station, in ledger.Inspection, view string, at pipeline.Point, units []string) bool {
	a, err := w.Ledger.RaiseAlarm(ctx, ledger.Alarm{Name: pipeline.ReasonDirt, Line: in.Line, Station: in.Station, View: view, XPx: at.X, YPx: at.Y,
		Units: units, RaisedBy: in.ID, Raised: w.Now(),
		Text: fmt.Sprintf("view %s: %d successive units have a defect at (%.1f, %.1f) px of the camera's frame (%s): dirt on lens or window, or a hot pixel; clean it, or calibrate again",
			view, len(units), at.X, at.Y, strings.Join(units, ", "))})
	if err != nil {
		w.Log.Error("an alarm cannot be kept in the ledger", "alarm", a.Text, "error", err)
		return false
	}
	s.open = append(s.open, a)
	w.note(in.ID, a)
	return true
}

// note remembers an event and logs it.
func (w *Watch) note(inspection int64, a ledger.Alarm) {
	what := "alarm raised"
	if !a.Open() {
		what = "alarm cleared"
	}
	w.Log.Warn(what, "name", a.Name, "line", a.Line, "station", a.Station, "text", a.Text)
	w.mu.Lock()
	defer w.mu.Unlock()
	w.events = append(w.events, event{inspection, a})
	if over := len(w.events) - mostEvents; over > 0 {
		w.events = slices.Delete(w.events, 0, over)
	}
}

// By returns the alarms that an inspection raised or cleared lately.
func (w *Watch) By(inspection int64) []ledger.Alarm {
	if w == nil {
		return nil
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	var out []ledger.Alarm
	for _, e := range w.events {
		if e.inspection == inspection {
			out = append(out, e.alarm)
		}
	}
	return out
}
