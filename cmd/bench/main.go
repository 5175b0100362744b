// Command bench measures speed as the Makefile's bench target, writes the figures as JSON
// and says which miss their goals. Figures of one run may be compared with each other;
// those of two runs, on a shared machine, may not.
package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// figure is one measured value.
type figure struct {
	Value float64 `json:"value"`
	Unit  string  `json:"unit"`
}

// options of a run.
type options struct {
	lapgated string        // the server program
	short    bool          // fewer repeats, for a quick look; no goal fails it
	only     string        // names of parts, with commas between; empty = all
	scene    func() *scene // the same in all parts
}

// rounds is how often what is compared runs in turns: n times, in a short run 4.
func (o options) rounds(n int) int {
	if o.short {
		return 4
	}
	return n
}

// part is something to be measured.
type part struct {
	name    string // for --only
	what    string
	measure func(options) (map[string]figure, error)
}

func parts() []part {
	return []part{
		{"fused", "the fused pass", benchFused},
		{"verdicts", "frame in over gRPC, verdict out", benchVerdicts},
		{"lines", "the search for faint lines", benchLines},
		{"reference", "reference and OpenCV chains, 12 megapixels", benchReference},
		{"outside", "stages in processes of their own", benchOutside},
		{"volume", "volume plan, 72 combinations", benchVolume},
	}
}

func main() {
	serveIfAsked()
	compareIfAsked()
	o := options{scene: sceneOnce()}
	out := flag.String("out", "build/bench.json", "file to write")
	flag.StringVar(&o.only, "only", "", "measure these parts alone, such as fused,verdicts")
	flag.StringVar(&o.lapgated, "lapgated", "build/lapgated", "the server program")
	flag.BoolVar(&o.short, "short", false, "fewer repeats and only the parts with goals; a missed goal is reported, but is no failure")
	flag.Parse()
	chosen, err := choose(parts(), o)
	if err == nil {
		err = run(o, chosen, *out, os.Stdout)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

// choose returns the parts named, or all; of a short run those that have goals.
func choose(all []part, o options) ([]part, error) {
	if o.only == "" && !o.short {
		return all, nil
	}
	if o.only == "" {
		return slices.DeleteFunc(all, func(p part) bool { return len(goalsOf(p.name)) == 0 }), nil
	}
	var out []part
	for _, name := range strings.Split(o.only, ",") {
		i := slices.IndexFunc(all, func(p part) bool { return p.name == name })
		if i < 0 {
			return nil, fmt.Errorf("--only: got %q, want some of fused, verdicts, lines, reference, outside, volume", name)
		}
		out = append(out, all[i])
	}
	return out, nil
}

func run(o options, chosen []part, out string, w io.Writer) error {
	all, times := map[string]figure{}, map[string]int{}
	for _, p := range chosen {
		fmt.Fprintf(os.Stderr, "bench: %s\n", p.what)
		figures, n, err := measure(p, o)
		if err != nil {
			return fmt.Errorf("%s: %w", p.what, err)
		}
		maps.Copy(all, figures)
		times[p.name] = n
	}
	if err := write(all, out, w); err != nil {
		return err
	}
	return report(w, all, times, o)
}

func write(all map[string]figure, out string, w io.Writer) error {
	text, err := json.MarshalIndent(all, "", "  ")
	if err != nil {
		return err
	}
	if err := os.MkdirAll(filepath.Dir(out), 0o755); err != nil {
		return err
	}
	if err := os.WriteFile(out, append(text, '\n'), 0o644); err != nil {
		return err
	}
	for _, name := range slices.Sorted(maps.Keys(all)) {
		fmt.Fprintf(w, "%-36s %12.4g %s\n", name, all[name].Value, all[name].Unit)
	}
	return nil
}
