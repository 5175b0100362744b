package report

import (
	"math"

	"lapgate/server/volume"
)

// crossoverRow is one crossover, or several of one turn, as texts.
type crossoverRow struct {
	At, Below, Above, Cost string
	Changes                int
	Spread                 bool // some draw has such a crossover
	Median, Low, High      string
	SD, Delta              string
	Share                  float64
	Draws                  string
}

func turnRows(r *volume.Result) []crossoverRow {
	var rows []crossoverRow
	for _, t := range r.Turns() {
		row := newCrossoverRow(r, t.Below, t.Above, t.Cost, t.Distribution)
		row.At, row.Changes = groupThousands(t.From), t.Changes
		if to := groupThousands(t.To); to != row.At {
			row.At += " to " + to
		}
		rows = append(rows, row)
	}
	return rows
}

// otherRows are the crossovers that are no turn of the cheapest combination.
func otherRows(r *volume.Result) []crossoverRow {
	var rows []crossoverRow
	for _, x := range r.Crossovers {
		if x.WinnerTurn {
			continue
		}
		row := newCrossoverRow(r, x.Below(), x.Above(), x.Cost, *x.Distribution)
		row.At, row.Changes = groupThousands(x.Quantity), 1
		rows = append(rows, row)
	}
	return rows
}

func newCrossoverRow(r *volume.Result, below, above int, cost volume.Money, d volume.CrossingDistribution) crossoverRow {
	return crossoverRow{Below: r.Combinations[below].String(), Above: r.Combinations[above].String(), Cost: volumeMoney(cost),
		Spread: d.Share > 0, Median: groupThousands(d.Median), Low: groupThousands(d.Low), High: groupThousands(d.High),
		SD: groupThousands(d.SD), Delta: deltaText(d.DeltaSD), Share: d.Share, Draws: groupThousands(float64(d.Draws))}
}

func deltaText(sd volume.Money) string {
	if math.IsNaN(float64(sd)) || math.IsInf(float64(sd), 0) {
		return "–"
	}
	return groupThousands(float64(sd))
}
