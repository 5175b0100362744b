package main

import (
	"encoding/csv"
	"fmt"
	"os"
	"path/filepath"

	"lapgate/configs"
)

// split says which groups of pictures settings were chosen on, and which are scored.
// Pictures of one group show the same surface, so a group is never on both sides.
type split struct {
	Rule   string   // how groups were dealt, and how settings were chosen
	Choose []string // groups
	Score  []string // groups
}

// picture is one line of a list.csv.
type picture struct{ file, class, group string }

// pictures reads list.csv of a data folder.
func pictures(dir string) ([]picture, error) {
	rows, err := readCSV(filepath.Join(dir, "list.csv"), 4)
	if err != nil {
		return nil, err
	}
	var out []picture
	for _, r := range rows {
		out = append(out, picture{file: r[0], class: r[2], group: r[3]})
	}
	return out, nil
}

// readCSV returns the lines after the header; each must have the columns asked for.
func readCSV(path string, columns int) ([][]string, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.FieldsPerRecord = columns
	rows, err := r.ReadAll()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(rows) < 2 {
		return nil, fmt.Errorf("%s: got no line after the header", path)
	}
	return rows[1:], nil
}

// loadSplit reads testdata/evaluate/NAME.split.yaml and deals the pictures by it. Every
// group must be dealt, and to one side only.
func loadSplit(o options, name string, all []picture) (choose, score []picture, err error) {
	s, _, err := configs.Load[split](filepath.Join(o.testdata, "evaluate", name+".split.yaml"))
	if err != nil {
		return nil, nil, err
	}
	side := map[string]int{}
	for _, g := range s.Choose {
		side[g] |= 1
	}
	for _, g := range s.Score {
		side[g] |= 2
	}
	for _, p := range all {
		switch side[p.group] {
		case 1:
			choose = append(choose, p)
		case 2:
			score = append(score, p)
		default:
			return nil, nil, fmt.Errorf("%s.split.yaml: group %s stands on %d sides, want one", name, p.group, side[p.group])
		}
	}
	return choose, score, nil
}
