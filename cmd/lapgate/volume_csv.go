package main

import (
	"encoding/csv"
	"io"
	"math"
	"strconv"

	"lapgate/server/volume"
)

// writeVolumeCSV writes one line per quantity and combination, costs per good
// unit shipped; an empty cell is a cost without bound.
func writeVolumeCSV(w io.Writer, r *volume.Result) error {
	out := csv.NewWriter(w)
	header := []string{"good_units", "process", "inspection", "cost", "low", "high", "mean", "chance_best", "best",
		"tooling", "making", "scrap", "inspecting", "false_rejects", "holds", "escapes", "rework",
		"starts", "stations", "wait_s", "escapes_per_million", "outside_usual_quantity"}
	if err := out.Write(header); err != nil {
		return err
	}
	for _, q := range r.Quantities {
		for i, c := range q.Cells {
			if err := out.Write(volumeRecord(r.Combinations[i], q, i, c)); err != nil {
				return err
			}
		}
	}
	out.Flush()
	return out.Error()
}

func volumeRecord(name volume.Combination, q volume.Quantity, i int, c volume.Cell) []string {
	p := c.Parts
	record := []string{number(q.Good), name.Process, name.Inspection}
	for _, v := range []float64{float64(c.Cost), float64(c.Low), float64(c.High), float64(c.Mean), c.ChanceBest} {
		record = append(record, number(v))
	}
	record = append(record, strconv.FormatBool(i == q.Best))
	for _, v := range []float64{p.Tooling, p.Making, p.Scrap, p.Inspection, p.FalseRejects, p.Holds, p.Escapes, p.Rework,
		c.Starts, float64(c.Stations.Count), c.Stations.WaitS, c.EscapesPerMillion} {
		record = append(record, number(v))
	}
	return append(record, strconv.FormatBool(c.OutsideUsual))
}

func number(v float64) string {
	if math.IsInf(v, 0) || math.IsNaN(v) {
		return ""
	}
	return strconv.FormatFloat(v, 'g', 10, 64)
}
