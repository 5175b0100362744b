package stagetest

import (
	"fmt"
	"testing"

	"lapgate/pipeline"
)

// Verdict is what the suite says of one property of a stage.
type Verdict struct {
	Property string   `json:"property"`
	Wanted   string   `json:"wanted"` // a sentence
	Pass     bool     `json:"pass"`
	Skipped  string   `json:"skipped"`  // why it was not looked at; empty = it was
	Findings []string `json:"findings"` // what was wrong
}

// Verify puts a stage with its default settings through the suite. The stage is built
// with the calibration and geometry of an Item from makeItem. It needs no testing.T, so
// that a program can say of a stranger's stage what holds and what does not.
func Verify(factory pipeline.Factory, makeItem Maker) []Verdict {
	s := suite{factory, makeItem}
	var out []Verdict
	for _, p := range s.properties() {
		r := &report{}
		r.guard(func() { p.check(r) })
		r.close()
		out = append(out, Verdict{Property: p.name, Wanted: p.wanted, Pass: len(r.findings) == 0 && r.skipped == "", Skipped: r.skipped, Findings: r.findings})
	}
	return out
}

// Run is Verify inside a test: each property is a test of its own.
func Run(t *testing.T, factory pipeline.Factory, makeItem Maker) {
	t.Helper()
	for _, v := range Verify(factory, makeItem) {
		t.Run(v.Property, func(t *testing.T) {
			for _, f := range v.Findings {
				t.Error(f)
			}
			if v.Skipped != "" && len(v.Findings) == 0 {
				t.Skip(v.Skipped)
			}
		})
	}
}

// report collects what is wrong with one property.
type report struct {
	findings []string
	skipped  string
	cleanups []func()
}

func (r *report) wrong(format string, args ...any) {
	r.findings = append(r.findings, fmt.Sprintf(format, args...))
}

// guard turns a panic of the stage into a finding.
func (r *report) guard(f func()) {
	defer func() {
		if p := recover(); p != nil {
			r.wrong("panic: %v", p)
		}
	}()
	f()
}

func (r *report) close() {
	for _, f := range r.cleanups {
		r.guard(f)
	}
}
