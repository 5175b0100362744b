package yield

import (
	"cmp"
	"fmt"
	"slices"
)

// ReasonCount says on how many units a reason was the first one, and on how many it was given at all.
type ReasonCount struct {
	Reason     string
	First, Any int
}

// ParetoRow is one reason's place among all. Shares are of the units that have a reason.
type ParetoRow struct {
	ReasonCount
	Share      float64 // First / units: these add up to 1
	Cumulative float64 // Share of this row and all above it
	AnyShare   float64 // Any / units: these add up to more than 1 when units have several reasons
}

// CountReasons counts the reasons of units, each unit's list in order of weight. A unit counts once under its
// first reason and once under each different one it has; a unit without reasons is left out. Sorted by reason.
func CountReasons(units [][]string) []ReasonCount {
	at := map[string]int{}
	var counts []ReasonCount
	for _, reasons := range units {
		for i, reason := range reasons {
			if slices.Contains(reasons[:i], reason) {
				continue
			}
			if _, known := at[reason]; !known {
				at[reason] = len(counts)
				counts = append(counts, ReasonCount{Reason: reason})
			}
			counts[at[reason]].Any++
			if i == 0 {
				counts[at[reason]].First++
			}
		}
	}
	slices.SortFunc(counts, func(a, b ReasonCount) int { return cmp.Compare(a.Reason, b.Reason) })
	return counts
}

// Pareto sorts reasons by First, then Any (both falling), then name, and adds shares. No counts give no rows.
func Pareto(counts []ReasonCount) ([]ParetoRow, error) {
	units, err := checkReasons(counts)
	if err != nil || units == 0 {
		return nil, err
	}
	sorted := slices.Clone(counts)
	slices.SortFunc(sorted, func(a, b ReasonCount) int {
		return cmp.Or(cmp.Compare(b.First, a.First), cmp.Compare(b.Any, a.Any), cmp.Compare(a.Reason, b.Reason))
	})
	rows := make([]ParetoRow, len(sorted))
	above := 0
	for i, c := range sorted {
		above += c.First
		rows[i] = ParetoRow{
			ReasonCount: c,
			Share:       float64(c.First) / float64(units),
			Cumulative:  float64(above) / float64(units),
			AnyShare:    float64(c.Any) / float64(units),
		}
	}
	return rows, nil
}

// checkReasons gives the number of units with a reason, which is the sum of First.
func checkReasons(counts []ReasonCount) (int, error) {
	units := 0
	seen := map[string]bool{}
	for _, c := range counts {
		if seen[c.Reason] {
			return 0, fmt.Errorf("reason %q twice: want one count for each reason", c.Reason)
		}
		seen[c.Reason] = true
		if c.First < 0 || c.Any < c.First {
			return 0, fmt.Errorf("reason %q: first on %d units, any on %d: want 0 <= first <= any", c.Reason, c.First, c.Any)
		}
		units += c.First
	}
	for _, c := range counts {
		if c.Any > units {
			return 0, fmt.Errorf("reason %q on %d units, but only %d units have a first reason", c.Reason, c.Any, units)
		}
	}
	return units, nil
}
