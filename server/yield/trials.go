package yield

import (
	"fmt"
	"math"
)

// TrialsWithoutFailure gives the smallest number of trials, all passed, that shows a pass rate of at
// least reliability with the confidence asked for (success run):
//
//	n = ⌈ln(1-confidence) / ln(reliability)⌉
func TrialsWithoutFailure(reliability, confidence float64) (int, error) {
	if !(reliability > 0 && reliability < 1) {
		return 0, fmt.Errorf("reliability %v: want a number strictly between 0 and 1; no number of trials shows 1", reliability)
	}
	if err := checkConfidence(confidence); err != nil {
		return 0, err
	}
	exact := math.Log1p(-confidence) / math.Log(reliability)
	const rounding = 1e-12 // 0.5, 0.75 is 2 trials and not 3 by a last bit
	n := math.Max(1, math.Ceil(exact*(1-rounding)))
	if n > math.MaxInt32 {
		return 0, fmt.Errorf("reliability %v at confidence %v needs %.3g trials: ask for less", reliability, confidence, n)
	}
	return int(n), nil
}
