package configs

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"lapgate/pipeline"
)

// masterFile is one master of a recipe as it is written.
type masterFile struct {
	Unit         string
	Expect       string   // accept or reject
	View         string   // with reject: the view that must find its defect
	Kind         string   // with reject: the kind of its defect
	Measure      string   // with reject: what is followed; empty = diameter_um
	AtLeast      *float64 // of the measure; not given = no bound
	AtMost       *float64
	EveryMinutes int      // due so long after it passed; 0 = only at due_at
	DueAt        []string // times of day by the server's clock, such as "06:00"
	GraceMinutes int      // how long the station may go on after due_at or every_minutes
}

func (c *recipeReader) masters(w recipeFile) []pipeline.MasterSpec {
	var out []pipeline.MasterSpec
	for i, m := range w.Masters {
		at := index("masters", i)
		c.id(at+".unit", m.Unit, true)
		c.wrong(slices.ContainsFunc(w.Masters[:i], func(o masterFile) bool { return o.Unit == m.Unit }), at+".unit",
			fmt.Sprintf("%q names an earlier master too", m.Unit), "a unit of its own for every master")
		spec := pipeline.MasterSpec{Unit: m.Unit, Expect: pipeline.Verdict(m.Expect), EveryMinutes: m.EveryMinutes, GraceMinutes: m.GraceMinutes}
		switch spec.Expect {
		case pipeline.Accept:
			c.wrong(m.View != "" || m.Kind != "" || m.Measure != "" || m.AtLeast != nil || m.AtMost != nil, at,
				"a master that must be accepted has no defect to find", "no view, kind, measure, at_least and at_most")
		case pipeline.Reject:
			c.masterDefect(m, at, w.Views, &spec)
		default:
			c.wrong(true, at+".expect", fmt.Sprintf("got %q", m.Expect), "accept or reject")
		}
		spec.DueAt = c.masterTimes(m, at)
		out = append(out, spec)
	}
	return out
}

// masterDefect reads what must be found of a master.
func (c *recipeReader) masterDefect(m masterFile, at string, views []viewFile, spec *pipeline.MasterSpec) {
	var names, kinds []string
	for _, v := range views {
		names = append(names, v.Name)
	}
	for _, k := range pipeline.Kinds() {
		kinds = append(kinds, string(k))
	}
	spec.View, spec.Kind, spec.Measure, spec.Low, spec.High = m.View, pipeline.Kind(m.Kind), m.Measure, m.AtLeast, m.AtMost
	if spec.Measure == "" {
		spec.Measure = pipeline.MasterMeasures()[0]
	}
	c.wrong(!slices.Contains(names, m.View), at+".view", fmt.Sprintf("got %q", m.View), "one of "+strings.Join(names, ", ")+": the view that must find the master's defect")
	c.wrong(!slices.Contains(kinds, m.Kind), at+".kind", fmt.Sprintf("got %q", m.Kind), "one of "+strings.Join(kinds, ", "))
	c.wrong(!slices.Contains(pipeline.MasterMeasures(), spec.Measure), at+".measure", fmt.Sprintf("got %q", m.Measure), "one of "+strings.Join(pipeline.MasterMeasures(), ", "))
	c.wrong(m.AtLeast != nil && m.AtMost != nil && *m.AtLeast > *m.AtMost, at+".at_least", "it lies above at_most", "at_most or less")
}

// masterTimes reads when a master is due, in minutes of the day.
func (c *recipeReader) masterTimes(m masterFile, at string) []int {
	const week = 7 * 24 * 60
	c.wrong(m.EveryMinutes < 0 || m.EveryMinutes > week, at+".every_minutes", fmt.Sprintf("got %d", m.EveryMinutes), fmt.Sprintf("0 to %d; 0 = only at due_at", week))
	c.wrong(m.GraceMinutes < 0 || m.GraceMinutes > 24*60, at+".grace_minutes", fmt.Sprintf("got %d", m.GraceMinutes), "0 to 1440")
	c.wrong(m.EveryMinutes == 0 && len(m.DueAt) == 0, at, "nothing says when the master is due", "every_minutes, or due_at with the starts of shifts, or both")
	var out []int
	for i, text := range m.DueAt {
		t, err := time.Parse("15:04", text)
		c.wrong(err != nil, index(at+".due_at", i), fmt.Sprintf("got %q", text), `a time of day such as "06:00"`)
		out = append(out, t.Hour()*60+t.Minute())
	}
	slices.Sort(out)
	return out
}
