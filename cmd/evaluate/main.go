package main

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
)

// options are the flags.
type options struct {
	data     string // folder of real pictures; empty = none
	testdata string // folder with scenes and evaluate
	out      string // JSON report; empty = none
	frames   int    // rendered frames
	only     string // name of the one section to run; empty = all
	choose   bool   // print the table from which the settings of the recipes are chosen
}

func main() {
	var o options
	flag.StringVar(&o.data, "data", "", "folder with the real pictures; empty or absent: those sections are skipped")
	flag.StringVar(&o.testdata, "testdata", "testdata", "folder with scenes/ and evaluate/")
	flag.StringVar(&o.out, "out", "", "write the report as JSON")
	flag.IntVar(&o.frames, "frames", 400, "rendered frames of the detection scene")
	flag.StringVar(&o.only, "only", "", "run one section alone: "+sectionNames())
	flag.BoolVar(&o.choose, "choose", false, "show how the settings for real pictures are chosen, and stop")
	flag.Parse()
	if err := run(o, os.Stdout, os.Stderr); err != nil {
		fmt.Fprintln(os.Stderr, "evaluate:", err)
		os.Exit(1)
	}
}

// section is one set of pictures.
type section struct {
	name   string
	folder string // below the data folder; empty = needs none
	run    func(o options, progress io.Writer) (*result, error)
	choose func(o options, out io.Writer) error // nil = nothing was chosen
}

func sections() []section {
	return []section{
		{name: "rendered", run: evaluateRendered},
		{name: "sizing", run: evaluateSizing},
		{name: "aircraft_glass_agdd", folder: "aircraft_glass_agdd", run: evaluateGlass, choose: chooseGlass},
		{name: "magnetic_tile", folder: "magnetic_tile", run: evaluateTiles, choose: chooseTiles},
		{name: "emva1288_ccd12", folder: "emva1288_ccd12", run: evaluateCamera},
		{name: "line_flats", folder: "line_flats", run: evaluateLine},
	}
}

func sectionNames() string {
	out := ""
	for _, s := range sections() {
		out += s.name + " "
	}
	return out[:len(out)-1]
}

func run(o options, out, progress io.Writer) error {
	var results []*result
	known := false
	for _, s := range sections() {
		if o.only != "" && o.only != s.name || o.choose && s.choose == nil {
			continue
		}
		known = true
		if missing := s.missing(o.data); missing != "" {
			fmt.Fprintf(out, "%s: skipped, %s\n\n", s.name, missing)
			results = append(results, &result{Name: s.name, Skipped: missing})
			continue
		}
		if o.choose {
			if err := s.choose(o, out); err != nil {
				return fmt.Errorf("%s: %w", s.name, err)
			}
			continue
		}
		r, err := s.run(o, progress)
		if err != nil {
			return fmt.Errorf("%s: %w", s.name, err)
		}
		r.Name = s.name
		r.print(out)
		results = append(results, r)
	}
	if !known {
		return fmt.Errorf("--only: got %q, want one of %s", o.only, sectionNames())
	}
	if o.choose {
		return nil
	}
	return finish(o, results)
}

// missing says why the section cannot run; empty = it can.
func (s section) missing(data string) string {
	if s.folder == "" {
		return ""
	}
	if data == "" {
		return "no folder of real pictures was given (--data)"
	}
	if _, err := os.Stat(filepath.Join(data, s.folder)); errors.Is(err, fs.ErrNotExist) {
		return "the data folder has no " + s.folder
	}
	return ""
}

// finish writes the report and says which requirements were missed.
func finish(o options, results []*result) error {
	if o.out != "" {
		text, err := json.MarshalIndent(results, "", "  ")
		if err != nil {
			return err
		}
		if err := os.MkdirAll(filepath.Dir(o.out), 0o755); err != nil {
			return err
		}
		if err := os.WriteFile(o.out, append(text, '\n'), 0o644); err != nil {
			return err
		}
	}
	var missed []error
	for _, r := range results {
		for _, q := range r.Requirements {
			if !q.Met {
				missed = append(missed, fmt.Errorf("%s: %s: got %s, want %s", r.Name, q.Name, q.Got, q.Want))
			}
		}
	}
	if len(missed) > 0 {
		return fmt.Errorf("%d requirements missed\n%w", len(missed), errors.Join(missed...))
	}
	return nil
}
