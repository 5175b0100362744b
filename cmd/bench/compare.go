package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"runtime"
	"time"

	"lapgate/pipeline/raster/cv"
	"lapgate/pipeline/raster/fused"
)

// against are the goals for times_fused of other methods. The figures they were drawn
// from: 95 to 128, 21 and 80 to 126 times.
var against = map[string]struct{ required, aim float64 }{pythonPlain: {50, 100}, pythonTuned: {10, 20}, sepName: {40, 80}}

// Names in the table.
const (
	fusedName   = "fused pass, 1 thread"
	pythonPlain = "Python and OpenCV, plain, 1 thread"
	pythonTuned = "Python and OpenCV, tuned, 2 threads"
	sepName     = "SEP, flat-field by numpy"
)

// centre of an object, px.
type centre [2]float64

// method is one way to do the detection job on the scene's frame.
type method struct {
	name    string // in the table
	threads int
	run     func() (took pair, found []centre, err error)
}

// compared is what a method reached: its shortest run by the clock and by CPU time.
type compared struct {
	Method  string  `json:"method"`
	ClockMS float64 `json:"clock_ms"`
	CPUMS   float64 `json:"cpu_ms"` // of all its threads
	Objects int     `json:"objects"`
	Common  int     `json:"in_common_with_sep"` // centres within 1.5 px
	Times   float64 `json:"times_fused"`        // over the fused pass on 1 thread: CPU time, or for 2 threads by the clock
}

// compareIfAsked compares the fused pass with general libraries, where the first argument
// says so.
func compareIfAsked() {
	if len(os.Args) < 2 || os.Args[1] != "compare" {
		return
	}
	flags := flag.NewFlagSet("compare", flag.ExitOnError)
	rounds := flags.Int("rounds", 12, "runs of each method, in turns; the shortest counts")
	asJSON := flags.Bool("json", false, "print JSON")
	script := flags.String("script", "testdata/compare/compare.py", "the methods of general libraries")
	_ = flags.Parse(os.Args[2:]) // ends the program on an error
	if err := compare(*rounds, *script, *asJSON, os.Stdout); err != nil {
		fmt.Fprintln(os.Stderr, "compare:", err)
		os.Exit(1)
	}
	os.Exit(0)
}

func compare(rounds int, script string, asJSON bool, w io.Writer) error {
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	s := newScene()
	outside, err := startScript(script, s)
	if err != nil {
		return err
	}
	defer outside.stop()
	methods, closing, err := ourMethods(s)
	if err != nil {
		return err
	}
	defer closing()
	methods = append(methods, outside.methods()...)
	table, err := inTurns(methods, max(rounds, 1))
	if err != nil {
		return err
	}
	if asJSON {
		e := json.NewEncoder(w)
		e.SetIndent("", "  ")
		return e.Encode(table)
	}
	printCompared(w, table, rounds, outside.versions)
	return nil
}

// ourMethods are the fused pass, and OpenCV called from Go.
func ourMethods(s scene) ([]method, func(), error) {
	pass, err := prepare(s.raw, fused.Planes{Dark: s.dark, Response: s.calibration().Response, Bad: s.bad})
	if err != nil {
		return nil, nil, err
	}
	chain, err := cv.NewTunedChain(s.dark, s.gain, s.bad, 3.5, 6)
	if err != nil {
		return nil, nil, err
	}
	fusedOn := func(bands int) func() (pair, []centre, error) {
		return timed(func() ([]centre, error) {
			r, err := pass.find(3.5, bands)
			if err != nil {
				return nil, err
			}
			var out []centre
			for _, b := range r.Blobs {
				out = append(out, centre{b.X, b.Y})
			}
			return out, nil
		})
	}
	opencvOn := func(threads int) func() (pair, []centre, error) {
		return timed(func() ([]centre, error) {
			cv.SetThreads(threads)
			objects, err := chain.Run(s.raw)
			var out []centre
			for _, o := range objects {
				out = append(out, centre{o.X, o.Y})
			}
			return out, err
		})
	}
	return []method{{fusedName, 1, fusedOn(1)}, {"fused pass, one frame in 2 bands", 2, fusedOn(2)},
		{"Go and OpenCV, tuned, 1 thread", 1, opencvOn(1)}, {"Go and OpenCV, tuned, 2 threads", 2, opencvOn(2)}}, chain.Close, nil
}

// timed measures by the clock and by the CPU time of the whole process.
func timed(f func() ([]centre, error)) func() (pair, []centre, error) {
	return func() (pair, []centre, error) {
		start, before := time.Now(), processTime()
		found, err := f()
		return pair{time.Since(start), processTime() - before}, found, err
	}
}

// inTurns runs every method once a round and keeps the shortest of each.
func inTurns(methods []method, rounds int) ([]compared, error) {
	best, found := make([]pair, len(methods)), make([][]centre, len(methods))
	for round := range rounds {
		for i, m := range methods {
			took, centres, err := m.run()
			if err != nil {
				return nil, fmt.Errorf("%s: %w", m.name, err)
			}
			found[i] = centres
			if round == 0 {
				best[i] = took
			}
			best[i] = pair{min(best[i].clock, took.clock), min(best[i].cpu, took.cpu)}
		}
	}
	return tabulate(methods, best, found), nil
}

// tabulate takes the first method as the fused pass and the last as SEP.
func tabulate(methods []method, best []pair, found [][]centre) []compared {
	ms := func(d time.Duration) float64 { return float64(d.Microseconds()) / 1000 }
	var out []compared
	for i, m := range methods {
		c := compared{Method: m.name, ClockMS: ms(best[i].clock), CPUMS: ms(best[i].cpu), Objects: len(found[i]), Common: inCommon(found[i], found[len(found)-1])}
		c.Times = float64(best[i].cpu) / float64(best[0].cpu)
		if m.threads > 1 {
			c.Times = float64(best[i].clock) / float64(best[0].clock)
		}
		out = append(out, c)
	}
	return out
}

// inCommon counts the centres of a that have one of b of their own within 1.5 px.
func inCommon(a, b []centre) int {
	taken, n := make([]bool, len(b)), 0
	for _, p := range a {
		at, least := -1, 1.5
		for i, q := range b {
			if d := math.Hypot(p[0]-q[0], p[1]-q[1]); !taken[i] && d <= least {
				at, least = i, d
			}
		}
		if at >= 0 {
			taken[at] = true
			n++
		}
	}
	return n
}

func printCompared(w io.Writer, table []compared, rounds int, versions string) {
	fmt.Fprintf(w, "One frame of %d × %d px (Mono8), flat-field to list of objects, shortest of %d runs in turns; %s\n\n", sceneWidth, sceneHeight, rounds, versions)
	fmt.Fprintf(w, "| %-36s | clock ms | CPU ms | objects | in common with SEP | times the fused pass |\n|%s|---|---|---|---|---|\n", "method", "---")
	for _, c := range table {
		fmt.Fprintf(w, "| %-36s | %.1f | %.1f | %d | %d | %.1f |\n", c.Method, c.ClockMS, c.CPUMS, c.Objects, c.Common, c.Times)
	}
	fmt.Fprintln(w)
	for _, c := range table {
		if g, ok := against[c.Method]; ok {
			word := "reached"
			if c.Times < g.required {
				word = "MISSED"
			} else if c.Times < g.aim {
				word = "required reached, aim missed"
			}
			fmt.Fprintf(w, "%s: %.1f times the fused pass on 1 thread, required %g, aim %g: %s\n", c.Method, c.Times, g.required, g.aim, word)
		}
	}
}
