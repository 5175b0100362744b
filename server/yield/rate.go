package yield

import "math"

// Rate is Count of Of with the uncertainty of both kinds of interval at one confidence.
type Rate struct {
	Count, Of      int
	Value          float64 // Count / Of; NaN when Of is 0, so test Of before encoding it
	ClopperPearson Interval
	Wilson         Interval
}

// NewRate computes the rate of count in of with its two-sided intervals.
func NewRate(count, of int, confidence float64) (Rate, error) {
	exact, err := ClopperPearson(count, of, confidence)
	if err != nil {
		return Rate{}, err
	}
	score, err := Wilson(count, of, confidence)
	if err != nil {
		return Rate{}, err
	}
	return Rate{Count: count, Of: of, Value: share(float64(count), float64(of)), ClopperPearson: exact, Wilson: score}, nil
}

// share is part / whole, NaN for a whole of zero.
func share(part, whole float64) float64 {
	if whole == 0 {
		return math.NaN()
	}
	return part / whole
}
