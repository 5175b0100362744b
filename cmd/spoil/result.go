package main

import (
	"fmt"
	"io"
	"slices"
	"strings"
	"text/tabwriter"

	"lapgate/pipeline"
)

// result is what became of the units of one fault.
type result struct {
	Fault    string                 `json:"fault"`
	Units    int                    `json:"units"`
	Accepted int                    `json:"accepted"`
	Rejected int                    `json:"rejected"`
	Held     int                    `json:"held"`
	Named    int                    `json:"cause_named"`     // units of which a reason names the cause
	Coverage float64                `json:"coverage_median"` // of the units
	Reasons  map[string]reasonCount `json:"reasons"`         // by the reason's name
	Example  string                 `json:"example"`         // the reason that names the cause, of the first unit
	passes   bool
	coverage []float64
	seconds  float64
}

// reasonCount is how many units had a reason, and what it said of the first.
type reasonCount struct {
	Units int    `json:"units"`
	First string `json:"first"`
}

func newResult(f fault) result {
	return result{Fault: f.name, Reasons: map[string]reasonCount{}, passes: f.passes}
}

func (r *result) count(f fault, e pipeline.Evidence, j pipeline.Judgement) {
	r.Units++
	switch j.Verdict {
	case pipeline.Accept:
		r.Accepted++
	case pipeline.Reject:
		r.Rejected++
	default:
		r.Held++
	}
	seen := map[string]bool{}
	named := ""
	for _, reason := range j.Reasons {
		if !seen[reason.Name] {
			seen[reason.Name] = true
			c := r.Reasons[reason.Name]
			if c.Units++; c.First == "" {
				c.First = reason.Text
			}
			r.Reasons[reason.Name] = c
		}
		for _, cause := range f.causes {
			if named == "" && strings.Contains(reason.Name+": "+reason.Text, cause) {
				named = reason.Name + ": " + reason.Text
			}
		}
	}
	if named != "" {
		r.Named++
		if r.Example == "" {
			r.Example = named
		}
	}
	r.coverage = append(r.coverage, e.Coverage)
	slices.Sort(r.coverage)
	r.Coverage = r.coverage[len(r.coverage)/2]
}

// commonest returns the reason that most units had.
func (r result) commonest() string {
	best := ""
	for name, c := range r.Reasons {
		if n := r.Reasons[best].Units; best == "" || c.Units > n || c.Units == n && name < best {
			best = name
		}
	}
	if best == "" {
		return "-"
	}
	return fmt.Sprintf("%s (%d)", best, r.Reasons[best].Units)
}

func printTable(w io.Writer, results []result) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "fault\tunits\taccepted\trejected\theld\tcause named\tcoverage\tcommonest reason")
	for _, r := range results {
		named := fmt.Sprint(r.Named)
		if r.passes {
			named = "-"
		}
		fmt.Fprintf(t, "%s\t%d\t%d\t%d\t%d\t%s\t%.3f\t%s\n", r.Fault, r.Units, r.Accepted, r.Rejected, r.Held, named, r.Coverage, r.commonest())
	}
	t.Flush()
	fmt.Fprintln(w, "\nfor example")
	for _, r := range results {
		if r.Example != "" {
			fmt.Fprintf(w, "  %s: %s\n", r.Fault, r.Example)
		}
	}
}

// mostHeld is the share of good units that may be held.
const mostHeld = 0.01

// judge returns what the table must not show.
func judge(results []result) error {
	var wrong []string
	for _, r := range results {
		switch {
		case r.passes && float64(r.Held) > mostHeld*float64(r.Units):
			wrong = append(wrong, fmt.Sprintf("%s: %d of %d held, want at most %.0f %%", r.Fault, r.Held, r.Units, 100*mostHeld))
		case r.passes:
		case r.Accepted > 0:
			wrong = append(wrong, fmt.Sprintf("%s: %d of %d accepted, want none", r.Fault, r.Accepted, r.Units))
		case r.Named < r.Units:
			wrong = append(wrong, fmt.Sprintf("%s: the cause is named for %d of %d", r.Fault, r.Named, r.Units))
		}
	}
	if wrong != nil {
		return fmt.Errorf("%s", strings.Join(wrong, "\n"))
	}
	return nil
}
