package main

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/server/report"
)

// parsePatch reads X,Y,W,H; an empty text is no patch.
func parsePatch(text string) (*pipeline.Box, error) {
	if text == "" {
		return nil, nil
	}
	var n [4]int
	parts := strings.Split(text, ",")
	for i := range n {
		var err error
		if len(parts) == len(n) {
			n[i], err = strconv.Atoi(strings.TrimSpace(parts[i]))
		}
		if err != nil || len(parts) != len(n) || n[i] < 0 || i > 1 && n[i] == 0 {
			return nil, fmt.Errorf("--patch: got %q, want X,Y,W,H in whole px, such as 24,24,96,96", text)
		}
	}
	return &pipeline.Box{X0: n[0], Y0: n[1], X1: n[0] + n[2], Y1: n[1] + n[3]}, nil
}

// readDiameters reads the diameters of a sizing target's dots, a line per row.
func readDiameters(path string) ([][]float64, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	r := csv.NewReader(bytes.NewReader(text))
	r.FieldsPerRecord = -1
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	var out [][]float64
	for i, row := range rows {
		var line []float64
		for k, cell := range row {
			v := 0.0
			if cell = strings.TrimSpace(cell); cell != "" {
				if v, err = strconv.ParseFloat(cell, 64); err != nil || !(v >= 0 && v < 1e6) {
					return nil, fmt.Errorf("%s: row %d, column %d: got %q, want a diameter in µm, or nothing", path, i+1, k+1, cell)
				}
			}
			line = append(line, v)
		}
		out = append(out, line)
	}
	return out, nil
}

// writeCalibrationPage writes the page whole or not at all.
func writeCalibrationPage(path string, made calibrate.Made) error {
	building, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.Remove(building.Name()) // nothing is there once renamed
	err = report.WriteCalibration(building, made)
	if closing := building.Close(); err == nil {
		err = closing
	}
	if err == nil {
		err = os.Chmod(building.Name(), 0o644)
	}
	if err == nil {
		err = os.Rename(building.Name(), path)
	}
	return err
}
