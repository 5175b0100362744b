package sampling

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// SinglePlan is one single sampling plan: inspect N units of the lot, accept
// the lot when at most Accept of them are nonconforming.
type SinglePlan struct {
	Letter string // code letter after the arrows are followed
	N      int    // sample size in units
	Accept int    // acceptance number; rejection number is Accept+1
}

// codeLetters are the sample size code letters of ISO 2859-1 (I and O unused).
const codeLetters = "ABCDEFGHJKLMNPQR"

// Levels are the inspection levels of ISO 2859-1 table 1, in table order.
func Levels() []string { return []string{"S-1", "S-2", "S-3", "S-4", "I", "II", "III"} }

// AQLs are the acceptance quality limits in percent nonconforming that
// NormalPlan knows, in table order.
func AQLs() []float64 {
	return []float64{0.010, 0.015, 0.025, 0.040, 0.065, 0.10, 0.15, 0.25, 0.40, 0.65, 1.0, 1.5, 2.5, 4.0, 6.5, 10}
}

// sampleSizes belong to codeLetters, in units.
func sampleSizes() []int {
	return []int{2, 3, 5, 8, 13, 20, 32, 50, 80, 125, 200, 315, 500, 800, 1250, 2000}
}

// diagonal is what stands in a column of table 2-A from the row of the zero
// plan downwards: acceptance numbers, up = follow the arrow up, down = down.
func diagonal() []int { return []int{0, up, down, 1, 2, 3, 5, 7, 10, 14, 21} }

const (
	up   = -1
	down = -2
)

// codeRows is ISO 2859-1 table 1: the largest lot of each row and its letters
// for the levels S-1 S-2 S-3 S-4 I II III; the last row has no upper end.
func codeRows() []struct {
	lotMax  int
	letters string
} {
	return []struct {
		lotMax  int
		letters string
	}{
		{8, "AAAAAAB"}, {15, "AAAAABC"}, {25, "AABBBCD"}, {50, "ABBCCDE"},
		{90, "BBCCCEF"}, {150, "BBCDDFG"}, {280, "BCDEEGH"}, {500, "BCDEFHJ"},
		{1200, "CCEFGJK"}, {3200, "CDEGHKL"}, {10000, "CDFGJLM"}, {35000, "CDFHKMN"},
		{150000, "DEGJLNP"}, {500000, "DEGJMPQ"}, {0, "DEHKNQR"},
	}
}

// CodeLetter gives the sample size code letter of a lot (units) at a level,
// ISO 2859-1 table 1. A lot below 2 units or an unknown level is an error.
func CodeLetter(lot int, level string) (string, error) {
	column := slices.Index(Levels(), level)
	if column < 0 {
		return "", fmt.Errorf("inspection level %q is unknown; allowed: %s", level, strings.Join(Levels(), ", "))
	}
	if lot < 2 {
		return "", fmt.Errorf("lot of %d units; a lot has at least 2", lot)
	}
	for _, row := range codeRows() {
		if row.lotMax == 0 || lot <= row.lotMax {
			return row.letters[column : column+1], nil
		}
	}
	return "", fmt.Errorf("lot of %d units has no row in table 1", lot)
}

// NormalPlan gives the single sampling plan for normal inspection of a lot
// (units) at a level and an AQL (percent): ISO 2859-1 tables 1 and 2-A. The
// arrows are followed, so the plan's letter may differ from the lot's. Where
// the sample is not smaller than the lot the whole lot is inspected.
func NormalPlan(lot int, level string, aqlPercent float64) (SinglePlan, error) {
	letter, err := CodeLetter(lot, level)
	if err != nil {
		return SinglePlan{}, err
	}
	return PlanForLetter(letter, aqlPercent)
}

// PlanForLetter resolves one cell of ISO 2859-1 table 2-A by the diagonal
// rule: in the column of the i-th AQL (0.010 is 0) the zero plan stands in row
// 14-i, and below it come the entries of diagonal.
func PlanForLetter(letter string, aqlPercent float64) (SinglePlan, error) {
	row := strings.Index(codeLetters, letter)
	if row < 0 || len(letter) != 1 {
		return SinglePlan{}, fmt.Errorf("code letter %q is unknown; allowed: one of %s", letter, codeLetters)
	}
	column := slices.Index(AQLs(), aqlPercent)
	if column < 0 {
		return SinglePlan{}, fmt.Errorf("AQL %v %% is not a value of ISO 2859-1; allowed: %s", aqlPercent, joinAQLs())
	}
	row, accept := followArrows(row, column)
	return SinglePlan{Letter: codeLetters[row : row+1], N: sampleSizes()[row], Accept: accept}, nil
}

// followArrows walks from a cell to the plan its arrow points at. An arrow
// that would leave the table turns back.
func followArrows(row, column int) (planRow, accept int) {
	step := 0
	for {
		entry := cell(row, column)
		if entry >= 0 {
			return row, entry
		}
		if step == 0 {
			step = map[int]int{up: -1, down: +1}[entry]
		}
		if row+step < 0 || row+step >= len(codeLetters) {
			step = -step
		}
		row += step
	}
}

func cell(row, column int) int {
	d := row - (14 - column)
	switch entries := diagonal(); {
	case d < 0:
		return down
	case d >= len(entries):
		return up
	default:
		return entries[d]
	}
}

func joinAQLs() string {
	var texts []string
	for _, a := range AQLs() {
		texts = append(texts, strconv.FormatFloat(a, 'g', -1, 64))
	}
	return strings.Join(texts, ", ")
}
