package yield

import "math"

// Wilson gives the two-sided score interval without continuity correction for the rate behind
// count of trials (Wilson 1927). Its coverage is near confidence on average and can fall below it
// for single rates; use ClopperPearson for a promise. With z = normal quantile of 1-(1-confidence)/2
//
//	(k + z²/2 ± z √(k(n-k)/n + z²/4)) / (n + z²)
func Wilson(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return scoreInterval(count, trials, normalQuantile(1-(1-confidence)/2)), nil
}

// WilsonLower gives the one-sided score lower bound; confidence must be at least 0.5 for it to lie below count/trials.
func WilsonLower(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: scoreInterval(count, trials, normalQuantile(confidence)).Low, High: 1}, nil
}

// WilsonUpper gives the one-sided score upper bound; see WilsonLower.
func WilsonUpper(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: 0, High: scoreInterval(count, trials, normalQuantile(confidence)).High}, nil
}

// scoreInterval has ends of exactly 0 and 1 where the formula gives them, free of rounding. No trials give [0, 1].
func scoreInterval(count, trials int, z float64) Interval {
	if trials == 0 {
		return Interval{Low: 0, High: 1}
	}
	k, n := float64(count), float64(trials)
	middle := (k + z*z/2) / (n + z*z)
	half := z * math.Sqrt(k*(n-k)/n+z*z/4) / (n + z*z)
	interval := Interval{Low: middle - half, High: middle + half}
	if count == 0 && z >= 0 {
		interval.Low = 0
	}
	if count == trials && z >= 0 {
		interval.High = 1
	}
	return interval
}
