package yield

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Poisson gives the exact two-sided interval for the expected number of events behind a count
// (Garwood 1936). With tail = (1-confidence)/2
//
//	low = ChiSquareQuantile(tail; 2k)/2 (0 for k = 0), high = ChiSquareQuantile(1-tail; 2k+2)/2
//
// Divide both ends by the exposure (units, area) for a rate.
func Poisson(count int, confidence float64) (Interval, error) {
	if err := checkEvents(count, confidence); err != nil {
		return Interval{}, err
	}
	tail := (1 - confidence) / 2
	return Interval{Low: gammaQuantile(count, tail), High: gammaQuantile(count+1, 1-tail)}, nil
}

// PoissonUpper gives the one-sided exact upper bound of the expected number of events.
func PoissonUpper(count int, confidence float64) (Interval, error) {
	if err := checkEvents(count, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: 0, High: gammaQuantile(count+1, confidence)}, nil
}

// PoissonLower gives the one-sided exact lower bound of the expected number of events.
func PoissonLower(count int, confidence float64) (Interval, error) {
	if err := checkEvents(count, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: gammaQuantile(count, 1-confidence), High: math.Inf(1)}, nil
}

// gammaQuantile is half the chi-square quantile with 2 shape degrees of freedom; 0 for shape 0.
func gammaQuantile(shape int, p float64) float64 {
	if shape == 0 {
		return 0
	}
	return distuv.Gamma{Alpha: float64(shape), Beta: 1}.Quantile(p)
}

func checkEvents(count int, confidence float64) error {
	if count < 0 {
		return fmt.Errorf("%d events: want zero or more", count)
	}
	return checkConfidence(confidence)
}
