package main

import (
	"fmt"
	"io"

	"lapgate/server/yield"
)

// confidence of every interval.
const confidence = 0.95

// result is what one section measured.
type result struct {
	Name         string        `json:"name"`
	Skipped      string        `json:"skipped,omitempty"` // why it did not run
	Figures      []figure      `json:"figures"`
	Requirements []requirement `json:"requirements"`
}

// figure is one number with what it rests on.
type figure struct {
	Name  string   `json:"name"`
	Value float64  `json:"value"`
	Low   *float64 `json:"low,omitempty"` // of the 95 % interval; absent = none was computed
	High  *float64 `json:"high,omitempty"`
	N     int      `json:"n,omitempty"` // of what the name says
	Note  string   `json:"note,omitempty"`
}

// requirement is a bound that the section must keep.
type requirement struct {
	Name string `json:"name"`
	Got  string `json:"got"`
	Want string `json:"want"`
	Met  bool   `json:"met"`
}

func (r *result) add(f figure) { r.Figures = append(r.Figures, f) }

// plain adds a number without an interval.
func (r *result) plain(name string, value float64, n int, note string) {
	r.add(figure{Name: name, Value: value, N: n, Note: note})
}

// between adds a number with its interval.
func (r *result) between(name string, value float64, i yield.Interval, n int, note string) {
	r.add(figure{Name: name, Value: value, Low: &i.Low, High: &i.High, N: n, Note: note})
}

// share adds count of n with its Clopper–Pearson interval and returns the share.
func (r *result) share(name string, count, n int, note string) (float64, error) {
	i, err := yield.ClopperPearson(count, n, confidence)
	if err != nil {
		return 0, err
	}
	s := float64(count) / float64(max(n, 1))
	r.between(name, s, i, n, note)
	return s, nil
}

func (r *result) atLeast(name string, got, want float64) {
	r.Requirements = append(r.Requirements, requirement{name, fmt.Sprintf("%.4g", got), fmt.Sprintf("at least %g", want), got >= want})
}

func (r *result) atMost(name string, got, want float64) {
	r.Requirements = append(r.Requirements, requirement{name, fmt.Sprintf("%.4g", got), fmt.Sprintf("at most %g", want), got <= want})
}

func (r *result) print(w io.Writer) {
	fmt.Fprintf(w, "%s\n", r.Name)
	for _, f := range r.Figures {
		interval := ""
		if f.Low != nil {
			interval = fmt.Sprintf("[%.4g, %.4g]", *f.Low, *f.High)
		}
		n := ""
		if f.N > 0 {
			n = fmt.Sprintf("n %d", f.N)
		}
		fmt.Fprintf(w, "  %-46s %9.4g  %-20s %-8s %s\n", f.Name, f.Value, interval, n, f.Note)
	}
	for _, q := range r.Requirements {
		mark := "met   "
		if !q.Met {
			mark = "MISSED"
		}
		fmt.Fprintf(w, "  %s %s: got %s, want %s\n", mark, q.Name, q.Got, q.Want)
	}
	fmt.Fprintln(w)
}
