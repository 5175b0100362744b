package plan

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// thresholdColumns are the columns of a threshold table, in order:
// the setting; misses among the nonconforming units; those units; false
// rejects among the conforming units; those units.
func thresholdColumns() []string {
	return []string{"setting", "misses", "nonconforming", "false_rejects", "conforming"}
}

// ReadThresholds reads a threshold table: CSV with a header line, settings
// rising, all rows over the same units. Errors name the line.
func ReadThresholds(r io.Reader) ([]ThresholdRow, error) {
	in := csv.NewReader(r)
	header, err := in.Read()
	if err != nil {
		return nil, fmt.Errorf("line 1: no header; want %s", strings.Join(thresholdColumns(), ","))
	}
	if strings.Join(header, ",") != strings.Join(thresholdColumns(), ",") {
		return nil, fmt.Errorf("line 1: header is %s; want %s", strings.Join(header, ","), strings.Join(thresholdColumns(), ","))
	}
	var rows []ThresholdRow
	for {
		record, err := in.Read()
		if errors.Is(err, io.EOF) {
			return rows, checkThresholds(rows)
		}
		if err != nil {
			return nil, err
		}
		line, _ := in.FieldPos(0)
		row, err := thresholdRow(record)
		if err != nil {
			return nil, fmt.Errorf("line %d: %w", line, err)
		}
		rows = append(rows, row)
	}
}

func thresholdRow(record []string) (ThresholdRow, error) {
	setting, err := strconv.ParseFloat(record[0], 64)
	if err != nil || math.IsNaN(setting) || math.IsInf(setting, 0) {
		return ThresholdRow{}, fmt.Errorf("setting %q is not a number", record[0])
	}
	var n [4]int
	for i := range n {
		if n[i], err = strconv.Atoi(record[i+1]); err != nil || n[i] < 0 {
			return ThresholdRow{}, fmt.Errorf("%s %q is not a whole number of 0 or more", thresholdColumns()[i+1], record[i+1])
		}
	}
	row := ThresholdRow{setting, n[0], n[1], n[2], n[3]}
	if row.Misses > row.Nonconforming || row.FalseRejects > row.Conforming {
		return row, errors.New("more misses or false rejects than units")
	}
	return row, nil
}

// checkThresholds wants one set of units judged at rising settings: misses go
// one way and false rejects the other.
func checkThresholds(rows []ThresholdRow) error {
	if len(rows) < 2 {
		return fmt.Errorf("%d rows; at least 2 settings are needed", len(rows))
	}
	if rows[0].Nonconforming == 0 || rows[0].Conforming == 0 {
		return errors.New("both conforming and nonconforming units are needed")
	}
	rising := LooserUpwards(rows)
	for i := 1; i < len(rows); i++ {
		a, b := rows[i-1], rows[i]
		if !rising {
			a.Misses, b.Misses, a.FalseRejects, b.FalseRejects = b.Misses, a.Misses, b.FalseRejects, a.FalseRejects
		}
		switch {
		case b.Setting <= a.Setting:
			return fmt.Errorf("line %d: setting %v does not rise", i+2, b.Setting)
		case a.Nonconforming != b.Nonconforming || a.Conforming != b.Conforming:
			return fmt.Errorf("line %d: other numbers of units than in the line before; all settings must judge the same units", i+2)
		case b.Misses < a.Misses || b.FalseRejects > a.FalseRejects:
			return fmt.Errorf("line %d: misses and false rejects must go opposite ways with the setting", i+2)
		}
	}
	return nil
}

// LooserUpwards says whether a higher setting lets more pass.
func LooserUpwards(rows []ThresholdRow) bool {
	first, last := rows[0], rows[len(rows)-1]
	return last.Misses-first.Misses >= last.FalseRejects-first.FalseRejects
}

// ResolveThreshold fills the threshold table by read, which is given the file
// name as the plan has it.
func (p *Plan) ResolveThreshold(read func(file string) ([]ThresholdRow, error)) error {
	if p.Threshold == nil {
		return nil
	}
	rows, err := read(p.Threshold.File)
	if err != nil {
		return &Problem{"threshold.file", fmt.Sprintf("%s: %v", p.Threshold.File, err)}
	}
	p.Threshold.Rows = rows
	return nil
}
