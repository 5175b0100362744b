package yield

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Interval is a closed range of a rate: a share between 0 and 1, or events per unit from 0 up.
// A one-sided bound has the natural end of the range (0, 1 or +Inf) on its open side.
type Interval struct{ Low, High float64 }

// Contains reports whether value lies in the interval, ends included.
func (i Interval) Contains(value float64) bool { return i.Low <= value && value <= i.High }

// Width is High - Low.
func (i Interval) Width() float64 { return i.High - i.Low }

// checkConfidence refuses what is not strictly between 0 and 1.
func checkConfidence(confidence float64) error {
	if !(confidence > 0 && confidence < 1) {
		return fmt.Errorf("confidence %v: want a number strictly between 0 and 1, such as 0.95", confidence)
	}
	return nil
}

// checkTrials refuses counts that cannot be count successes in trials.
func checkTrials(count, trials int, confidence float64) error {
	if trials < 0 {
		return fmt.Errorf("%d trials: want zero or more", trials)
	}
	if count < 0 || count > trials {
		return fmt.Errorf("%d of %d: want a count between 0 and the number of trials", count, trials)
	}
	return checkConfidence(confidence)
}

// checkRate refuses what is not a share.
func checkRate(name string, rate float64) error {
	if !(rate >= 0 && rate <= 1) {
		return fmt.Errorf("%s %v: want a share between 0 and 1", name, rate)
	}
	return nil
}

// checkPositive refuses what is not a positive finite number.
func checkPositive(name string, value float64) error {
	if !(value > 0) || math.IsInf(value, 1) {
		return fmt.Errorf("%s %v: want a positive finite number", name, value)
	}
	return nil
}

// normalQuantile is the point below which the standard normal has probability p.
func normalQuantile(p float64) float64 { return distuv.UnitNormal.Quantile(p) }
