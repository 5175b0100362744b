package pipeline

import (
	"fmt"
	"strings"
)

// CoverageMap says, cell by cell of the background grid and row by row, what would have
// been found there at the recipe's thresholds.
type CoverageMap struct {
	CellPx  int `json:"cell_px"`
	Columns int `json:"columns"`
	Rows    int `json:"rows"`
	// DigUM is the diameter of the smallest dig, and ScratchUM the width of the faintest
	// scratch, that is found with probability one half, in whole µm. 0: the cell is outside
	// the region; −1: nothing is found there. Empty where the recipe does not ask.
	DigUM     []int `json:"dig_um,omitempty"`
	ScratchUM []int `json:"scratch_um,omitempty"`
	// DigLimitUM and ScratchLimitUM are the most that a cell's value may be for the cell to
	// count as inspected; 0 where the recipe does not ask.
	DigLimitUM     int `json:"dig_limit_um,omitempty"`
	ScratchLimitUM int `json:"scratch_limit_um,omitempty"`
	// Shares of the region's pixels that are not inspected, by cause.
	NoisyShare     float64 `json:"noisy_share"`     // what the limits forbid could hide in the noise
	UnseenShare    float64 `json:"unseen_share"`    // bad pixels, or level and noise not measured
	SaturatedShare float64 `json:"saturated_share"` // saturated
}

// Inspected reports whether all that the limits forbid would have been found in cell i,
// which lies in the region.
func (m *CoverageMap) Inspected(i int) bool {
	found := func(um []int, limit int) bool { return i >= len(um) || um[i] > 0 && um[i] <= limit }
	return found(m.DigUM, m.DigLimitUM) && found(m.ScratchUM, m.ScratchLimitUM)
}

// Inside reports whether cell i has pixels in the region.
func (m *CoverageMap) Inside(i int) bool {
	return i < len(m.DigUM) && m.DigUM[i] != 0 || i < len(m.ScratchUM) && m.ScratchUM[i] != 0
}

// CoverageCause names, for the view with the smallest share, why the rest was not
// inspected; empty where no view has a map.
func CoverageCause(e Evidence) string {
	worst := -1
	for i, v := range e.Views {
		if v.CoverageMap != nil && (worst < 0 || v.Coverage.Share < e.Views[worst].Coverage.Share) {
			worst = i
		}
	}
	if worst < 0 {
		return ""
	}
	m := e.Views[worst].CoverageMap
	var causes []string
	for _, c := range []struct {
		share float64
		text  string
	}{{m.NoisyShare, "noise or too little light hides what the limits forbid"}, {m.UnseenShare, "masked or not measurable"}, {m.SaturatedShare, "saturated"}} {
		if c.share > 0 {
			causes = append(causes, fmt.Sprintf("%.1f %% %s", 100*c.share, c.text))
		}
	}
	if causes == nil {
		return ""
	}
	return fmt.Sprintf(" (view %s: %s)", e.Views[worst].Name, strings.Join(causes, ", "))
}
