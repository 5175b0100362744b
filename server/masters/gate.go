package masters

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Gate keeps a station from judging units while one of its masters failed or is overdue.
// Set its fields before first use; it is then safe for concurrent use.
type Gate struct {
	Ledger  *ledger.Store
	Started time.Time // masters that passed before are due
	Now     func() time.Time
	Log     *slog.Logger

	mu       sync.Mutex // guards stations
	stations map[station]*sync.RWMutex
}

type station struct{ line, station string }

// Enter returns what keeps a unit from being judged at its station: each is a hold. A
// showing of a master waits until the units before it are on record, and the units after
// it wait for its own record, so that none slips between a failing master and its marks.
// leave must be called once the showing is on record or given up.
func (g *Gate) Enter(ctx context.Context, id pipeline.Identity, r *pipeline.Recipe, conditions map[string]string) (holds []pipeline.Failure, leave func(), err error) {
	if len(r.Masters) == 0 {
		return nil, func() {}, nil
	}
	lock := g.lock(station{id.Line, id.Station})
	if _, is := Spec(r, id); is {
		lock.Lock()
		return nil, lock.Unlock, nil
	}
	lock.RLock()
	if !ships(id.Purpose) {
		return nil, lock.RUnlock, nil
	}
	if m, named := named(r, id.Unit); named {
		return []pipeline.Failure{{Reason: pipeline.ReasonMasterUnit, Detail: fmt.Sprintf("unit %s is a master of this recipe: it does not ship; show it with purpose master", m.Unit)}}, lock.RUnlock, nil
	}
	states, err := g.States(ctx, ledger.PlaceOf(id), r, conditions)
	if err == nil {
		holds, err = g.holds(ctx, id, r, states)
	}
	if err != nil {
		lock.RUnlock()
		return nil, nil, err
	}
	return holds, lock.RUnlock, nil
}

// ships reports whether a unit shown for this purpose may be sold.
func ships(p pipeline.Purpose) bool { return p == pipeline.Production || p == pipeline.Recheck }

func (g *Gate) lock(s station) *sync.RWMutex {
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.stations == nil {
		g.stations = map[station]*sync.RWMutex{}
	}
	if g.stations[s] == nil {
		g.stations[s] = &sync.RWMutex{}
	}
	return g.stations[s]
}

// holds turns states into failures, and marks the units since the last pass of a master
// that is late.
func (g *Gate) holds(ctx context.Context, id pipeline.Identity, r *pipeline.Recipe, states []State) ([]pipeline.Failure, error) {
	var out []pipeline.Failure
	for _, s := range states {
		if s.Reason == "" {
			continue
		}
		out = append(out, pipeline.Failure{Reason: s.Reason, Detail: s.Text})
		if !s.Late {
			continue
		}
		n, err := g.Ledger.MarkSuspects(ctx, ledger.PlaceOf(id), ledger.Suspicion{Master: s.Master.Unit, Cause: ledger.CauseOverdue, Why: s.Text, Recipe: r.TextHash})
		if err != nil {
			return nil, err
		}
		if n > 0 {
			g.Log.Warn("units are suspect", "units", n, "line", id.Line, "station", id.Station, "why", s.Text)
		}
	}
	return out, nil
}

// States returns how the masters of a recipe stand at a station. conditions are those of
// a unit's frames; nil leaves them aside.
func (g *Gate) States(ctx context.Context, p ledger.MasterPlace, r *pipeline.Recipe, conditions map[string]string) ([]State, error) {
	f := Facts{Now: g.Now(), Started: g.Started, Conditions: conditions}
	change, err := g.Ledger.LastChange(ctx, p.Line, p.Station)
	if err == nil {
		f.Change = &change
	} else if pipeline.KindOf(err) != pipeline.NotFoundKind {
		return nil, err
	}
	var out []State
	for _, m := range r.Masters {
		h, err := g.history(ctx, p, m.Unit, r.TextHash)
		if err != nil {
			return nil, err
		}
		out = append(out, stateOf(m, h, f))
	}
	return out, nil
}

func (g *Gate) history(ctx context.Context, p ledger.MasterPlace, master, recipe string) (h History, err error) {
	for _, q := range []struct {
		into   **ledger.MasterCheck
		result ledger.CheckResult
		recipe string
	}{{&h.Pass, ledger.CheckPass, recipe}, {&h.OtherPass, ledger.CheckPass, ""}, {&h.Fail, ledger.CheckFail, ""}} {
		c, err := g.Ledger.LastCheck(ctx, p, master, q.result, q.recipe)
		if err == nil {
			*q.into = &c
		} else if pipeline.KindOf(err) != pipeline.NotFoundKind {
			return h, err
		}
	}
	return h, nil
}

// Check returns what a showing of a master proved; nil = it is of none that the recipe names.
func (g *Gate) Check(r *pipeline.Recipe, in ledger.Inspection, conditions map[string]string) *ledger.MasterCheck {
	m, is := Spec(r, in.Identity)
	if !is {
		return nil
	}
	c := Compare(m, in.Evidence, in.Judgement, conditions)
	if c.Result != ledger.CheckPass {
		g.Log.Warn("master", "master", m.Unit, "line", in.Line, "station", in.Station, "result", c.Result, "why", c.Why)
	}
	return &c
}
