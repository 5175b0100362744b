// Command spoil shows rendered units whose pictures or surfaces are unfit to be accepted
// to a recipe, and prints a table of what became of them. It tunes nothing.
package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
)

// options are the flags.
type options struct {
	dir     string // scene.yaml and recipe.yaml
	out     string // JSON; empty = none
	only    string // name of one fault; empty = all
	units   int
	seed    uint64 // of the scene; 0 = the file's
	workers int
}

func main() {
	var o options
	flag.StringVar(&o.dir, "dir", filepath.Join("testdata", "spoil"), "folder with scene.yaml and recipe.yaml")
	flag.StringVar(&o.out, "out", "", "write the table as JSON to this file")
	flag.StringVar(&o.only, "only", "", "show this fault only")
	flag.IntVar(&o.units, "units", 200, "units of each fault")
	flag.Uint64Var(&o.seed, "seed", 0, "seed of the scene; 0 = the file's")
	flag.IntVar(&o.workers, "workers", 2, "faults that run at a time")
	flag.Parse()
	if err := run(o, os.Stdout, os.Stderr); err != nil {
		fmt.Fprintln(os.Stderr, "spoil:", err)
		os.Exit(1)
	}
}

// run shows all faults and prints the table; a fault that was accepted where it must not
// be is an error after the table.
func run(o options, out, progress io.Writer) error {
	b, err := newBench(o.dir, o.seed)
	if err != nil {
		return err
	}
	results, err := b.showAll(o, progress)
	if err != nil {
		return err
	}
	printTable(out, results)
	if o.out != "" {
		if err := writeResults(o.out, results); err != nil {
			return err
		}
	}
	return judge(results)
}

func writeResults(path string, results []result) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	text, err := json.MarshalIndent(map[string]any{"faults": results}, "", "  ")
	if err != nil {
		return err
	}
	return os.WriteFile(path, append(text, '\n'), 0o644)
}
