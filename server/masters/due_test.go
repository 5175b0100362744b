package masters

import (
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

var zone = time.FixedZone("shop", 2*3600)

func at(hour, minute int) time.Time { return time.Date(2026, 3, 2, hour, minute, 0, 0, zone) }

func TestDueAfter(t *testing.T) {
	shifts := []int{6 * 60, 14 * 60, 22 * 60}
	for _, c := range []struct {
		every      int
		times      []int
		pass, want time.Time
	}{
		{0, shifts, at(6, 5), at(14, 0)},
		{0, shifts, at(5, 59), at(6, 0)},
		{0, shifts, at(6, 0), at(14, 0)}, // passed at the very minute
		{0, shifts, at(22, 1), at(30, 0)},
		{0, []int{6 * 60}, at(6, 30), at(30, 0)},
		{120, nil, at(6, 5), at(8, 5)},
		{120, shifts, at(13, 0), at(14, 0)},
		{30, shifts, at(13, 0), at(13, 30)},
	} {
		m := pipeline.MasterSpec{EveryMinutes: c.every, DueAt: c.times}
		if got := dueAfter(m, c.pass); !got.Equal(c.want) {
			t.Errorf("every %d, %v, passed %v: due %v, want %v", c.every, c.times, c.pass, got, c.want)
		}
	}
}

func TestStateOf(t *testing.T) {
	m := pipeline.MasterSpec{Unit: "M1", DueAt: []int{6 * 60, 14 * 60}, GraceMinutes: 10}
	check := func(when time.Time) *ledger.MasterCheck {
		return &ledger.MasterCheck{At: when.UTC(), Why: "found no dig", Conditions: map[string]string{"lamp of view ring": "L1", "calibration of view ring": "c1"}}
	}
	pass := check(at(6, 30))
	passed := History{Pass: pass, OtherPass: pass}
	for name, c := range map[string]struct {
		h      History
		f      Facts
		reason string
		text   string
		late   bool
	}{
		"well":              {h: passed, f: Facts{Now: at(9, 0)}},
		"within the grace":  {h: passed, f: Facts{Now: at(14, 10)}},
		"overdue":           {h: passed, f: Facts{Now: at(14, 11)}, reason: pipeline.ReasonOverdue, text: "was due at 2026-03-02 14:00:00 and passed last at 2026-03-02 06:30:00", late: true},
		"never":             {f: Facts{Now: at(9, 0)}, reason: pipeline.ReasonOverdue, text: "it never passed here"},
		"other recipe":      {h: History{OtherPass: pass}, f: Facts{Now: at(9, 0)}, reason: pipeline.ReasonOverdue, text: "the recipe is another"},
		"restart":           {h: passed, f: Facts{Now: at(9, 0), Started: at(8, 0)}, reason: pipeline.ReasonOverdue, text: "the server started at 2026-03-02 08:00:00"},
		"start before":      {h: passed, f: Facts{Now: at(9, 0), Started: at(6, 0)}},
		"lamp":              {h: passed, f: Facts{Now: at(9, 0), Change: &ledger.StationChange{What: "lamp", Person: "O. Perator", At: at(7, 0)}}, reason: pipeline.ReasonOverdue, text: "the lamp was changed at 2026-03-02 07:00:00 by O. Perator"},
		"lamp before":       {h: passed, f: Facts{Now: at(9, 0), Change: &ledger.StationChange{What: "lamp", At: at(6, 0)}}},
		"other lamp":        {h: passed, f: Facts{Now: at(9, 0), Conditions: map[string]string{"lamp of view ring": "L2"}}, reason: pipeline.ReasonOverdue, text: "the lamp of view ring is L2 and was L1"},
		"unknown lamp":      {h: passed, f: Facts{Now: at(9, 0), Conditions: map[string]string{"lens of view ring": "N1", "calibration of view ring": "c1"}}},
		"failed":            {h: History{Pass: pass, OtherPass: pass, Fail: check(at(8, 0))}, f: Facts{Now: at(9, 0)}, reason: pipeline.ReasonMaster, text: "master M1 failed at 2026-03-02 08:00:00 (found no dig)"},
		"failed and mended": {h: History{Pass: pass, OtherPass: pass, Fail: check(at(6, 0))}, f: Facts{Now: at(9, 0)}},
		"failed at first":   {h: History{Fail: check(at(6, 0))}, f: Facts{Now: at(9, 0)}, reason: pipeline.ReasonMaster},
	} {
		s := stateOf(m, c.h, c.f)
		if s.Reason != c.reason || !strings.Contains(s.Text, c.text) || s.Late != c.late {
			t.Errorf("%s: %q, %q, late %v; want %q with %q, late %v", name, s.Reason, s.Text, s.Late, c.reason, c.text, c.late)
		}
	}
}
