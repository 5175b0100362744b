// Command bench measures speed as the Makefile's bench target, and writes the figures
// as JSON. Figures of one run may be compared with each other; those of two runs, on a
// shared machine, may not.
package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
)

// figure is one measured value.
type figure struct {
	Value float64 `json:"value"`
	Unit  string  `json:"unit"`
}

// options of a run.
type options struct {
	lapgated string // the server program
	short    bool   // fewer repeats, for a quick look
}

func main() {
	serveIfAsked()
	var o options
	out := flag.String("out", "build/bench.json", "file to write")
	flag.StringVar(&o.lapgated, "lapgated", "build/lapgated", "the server program")
	flag.BoolVar(&o.short, "short", false, "fewer repeats")
	flag.Parse()
	if err := run(o, *out); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(o options, out string) error {
	all := map[string]figure{}
	for _, part := range []struct {
		name    string
		measure func(options) (map[string]figure, error)
	}{
		{"reference and OpenCV chains, 12 megapixels", benchChains},
		{"the fused pass", benchFused},
		{"gRPC round trip and latency", benchServer},
		{"stages in processes of their own", benchOutside},
		{"volume plan, 72 combinations", benchVolume},
	} {
		fmt.Fprintf(os.Stderr, "bench: %s\n", part.name)
		figures, err := part.measure(o)
		if err != nil {
			return fmt.Errorf("%s: %w", part.name, err)
		}
		maps.Copy(all, figures)
	}
	return write(all, out)
}

func write(all map[string]figure, out string) error {
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
		fmt.Printf("%-36s %12.4g %s\n", name, all[name].Value, all[name].Unit)
	}
	return nil
}
