package masters

import (
	"fmt"
	"maps"
	"slices"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Facts is what a station is known to be like when a unit is to be judged.
type Facts struct {
	Now        time.Time
	Started    time.Time             // when the server started
	Change     *ledger.StationChange // the latest at the station; nil = none
	Conditions map[string]string     // of the unit's frames; nil = not known
}

// History is what is on record of a master at a station.
type History struct {
	Pass      *ledger.MasterCheck // the latest by the recipe that judges; nil = none
	OtherPass *ledger.MasterCheck // the latest by any recipe
	Fail      *ledger.MasterCheck // the latest by any recipe
}

// State says whether a master lets its station judge.
type State struct {
	Master  pipeline.MasterSpec
	History History
	Due     time.Time // when the clock asks for it next; zero = it is due for another reason
	Reason  string    // pipeline.ReasonMaster or pipeline.ReasonOverdue; empty = all is well
	Text    string    // why, for a person
	// Late: it is overdue by the clock, so that units were judged for longer than agreed.
	Late bool
}

// stateOf weighs a master's history against the facts. A failure lasts until a pass.
func stateOf(m pipeline.MasterSpec, h History, f Facts) State {
	s := State{Master: m, History: h}
	pass := h.Pass
	if h.Fail != nil && (pass == nil || !pass.At.After(h.Fail.At)) {
		s.Reason = pipeline.ReasonMaster
		s.Text = fmt.Sprintf("master %s failed at %s (%s); mend the cause and show it again", m.Unit, clock(h.Fail.At, f.Now), h.Fail.Why)
		return s
	}
	if why := eventSince(pass, h.OtherPass, f); why != "" {
		s.Reason, s.Text = pipeline.ReasonOverdue, fmt.Sprintf("master %s is due: %s; show it with purpose master", m.Unit, why)
		return s
	}
	s.Due = dueAfter(m, pass.At.In(f.Now.Location()))
	if f.Now.After(s.Due.Add(time.Duration(m.GraceMinutes) * time.Minute)) {
		s.Reason, s.Late = pipeline.ReasonOverdue, true
		s.Text = fmt.Sprintf("master %s was due at %s and passed last at %s; show it with purpose master", m.Unit, clock(s.Due, f.Now), clock(pass.At, f.Now))
	}
	return s
}

// eventSince says what happened since a pass that makes it void for what comes, or "".
func eventSince(pass, other *ledger.MasterCheck, f Facts) string {
	switch {
	case pass == nil && other == nil:
		return "it never passed here"
	case pass == nil:
		return fmt.Sprintf("the recipe is another than at its last pass at %s", clock(other.At, f.Now))
	case f.Started.After(pass.At):
		return fmt.Sprintf("the server started at %s, after its last pass", clock(f.Started, f.Now))
	case f.Change != nil && f.Change.At.After(pass.At):
		return fmt.Sprintf("the %s was changed at %s by %s, after its last pass", f.Change.What, clock(f.Change.At, f.Now), f.Change.Person)
	}
	for _, what := range slices.Sorted(maps.Keys(f.Conditions)) {
		if was, known := pass.Conditions[what]; known && was != f.Conditions[what] {
			return fmt.Sprintf("the %s is %s and was %s at its last pass", what, f.Conditions[what], was)
		}
	}
	return ""
}

// dueAfter returns when a master that passed is due again: after its interval or at the
// next of its times of day by the clock of pass's location, whichever comes first.
func dueAfter(m pipeline.MasterSpec, pass time.Time) time.Time {
	var due time.Time
	if m.EveryMinutes > 0 {
		due = pass.Add(time.Duration(m.EveryMinutes) * time.Minute)
	}
	for day := range 2 {
		for _, minute := range m.DueAt {
			at := time.Date(pass.Year(), pass.Month(), pass.Day()+day, minute/60, minute%60, 0, 0, pass.Location())
			if at.After(pass) && (due.IsZero() || at.Before(due)) {
				due = at
			}
		}
	}
	return due
}

// clock writes a time as the people at the station read it.
func clock(t, now time.Time) string { return t.In(now.Location()).Format("2006-01-02 15:04:05") }
