package main

import (
	"encoding/csv"
	"io"
	"strconv"

	"lapgate/server/volume"
)

// writeCrossoversCSV writes one line per crossover, in good units shipped. An
// empty cell is a figure that does not exist: no draw has such a crossing.
func writeCrossoversCSV(w io.Writer, r *volume.Result) error {
	out := csv.NewWriter(w)
	rows := [][]string{{"good_units", "cost", "below_process", "below_inspection", "above_process", "above_inspection", "winner_turn", "jump",
		"draws", "share_with_crossing", "low", "median", "high", "sd", "delta_method_sd"}}
	for i := range r.Crossovers {
		rows = append(rows, crossoverRecord(r, &r.Crossovers[i]))
	}
	return out.WriteAll(rows)
}

func crossoverRecord(r *volume.Result, x *volume.Crossover) []string {
	below, above, d := r.Combinations[x.Below()], r.Combinations[x.Above()], x.Distribution
	record := []string{number(x.Quantity), number(float64(x.Cost)), below.Process, below.Inspection, above.Process, above.Inspection,
		strconv.FormatBool(x.WinnerTurn), strconv.FormatBool(x.Jump), strconv.Itoa(d.Draws), number(d.Share)}
	if d.Share == 0 {
		return append(record, "", "", "", "", "")
	}
	return append(record, number(d.Low), number(d.Median), number(d.High), number(d.SD), number(float64(d.DeltaSD)))
}

// crossovers are those of the cheapest combination, then the others, pair by
// pair.
func (p *volumePrinter) crossovers() {
	p.title("Crossovers of the cheapest combination, %s", volume.Basis)
	p.spreads(p.r.Turns())
	p.title("Crossovers of other combinations, pair by pair")
	p.spreads(p.r.OtherTurns())
	p.line("(the figures of several changes are those of the first; --csv-crossovers lists every one)")
}

func (p *volumePrinter) spreads(turns []volume.Turn) {
	p.line("good units\tchanges\tcost\tbelow it\tabove it\tmedian\tinterval\ts.d.\tby delta\tdraws with one")
	for _, x := range turns {
		at := units(x.From)
		if units(x.To) != at {
			at += " to " + units(x.To)
		}
		p.line("%s\t%d\t%s\t%s\t%s\t%s\t%.1f %% of %d", at, x.Changes, money(x.Cost), p.r.Combinations[x.Below], p.r.Combinations[x.Above],
			spreadText(x.Distribution), 100*x.Distribution.Share, x.Distribution.Draws)
	}
}

// spreadText is the median, interval and standard deviations in four columns.
func spreadText(d volume.CrossingDistribution) string {
	if d.Share == 0 {
		return "-\t-\t-\t-"
	}
	delta := "-"
	if number(float64(d.DeltaSD)) != "" {
		delta = units(float64(d.DeltaSD))
	}
	return units(d.Median) + "\t" + units(d.Low) + " to " + units(d.High) + "\t" + units(d.SD) + "\t" + delta
}
