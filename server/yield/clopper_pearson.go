package yield

import "gonum.org/v1/gonum/stat/distuv"

// ClopperPearson gives the exact two-sided interval for the rate behind count of trials; its
// coverage is never below confidence (Clopper & Pearson 1934). With tail = (1-confidence)/2
//
//	low = BetaQuantile(tail; k, n-k+1), high = BetaQuantile(1-tail; k+1, n-k)
//
// low is 0 for k = 0 and high is 1 for k = n. It holds for independent trials of one rate:
// where lots differ use PoolLots.
func ClopperPearson(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return betaInterval(float64(count), float64(trials), (1-confidence)/2), nil
}

// ClopperPearsonLower gives the one-sided exact lower bound: the whole error probability is below it.
func ClopperPearsonLower(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: betaLow(float64(count), float64(trials), 1-confidence), High: 1}, nil
}

// ClopperPearsonUpper gives the one-sided exact upper bound. For count = 0 it is
// 1 - (1-confidence)^(1/n), near 3/n at 0.95: the rule of three.
func ClopperPearsonUpper(count, trials int, confidence float64) (Interval, error) {
	if err := checkTrials(count, trials, confidence); err != nil {
		return Interval{}, err
	}
	return Interval{Low: 0, High: betaHigh(float64(count), float64(trials), 1-confidence)}, nil
}

// betaInterval takes real counts, so that an effective number of trials can be put in.
func betaInterval(count, trials, tail float64) Interval {
	return Interval{Low: betaLow(count, trials, tail), High: betaHigh(count, trials, tail)}
}

func betaLow(count, trials, tail float64) float64 {
	if count <= 0 {
		return 0
	}
	return distuv.Beta{Alpha: count, Beta: trials - count + 1}.Quantile(tail)
}

// betaHigh mirrors betaLow, since a small tail is held more exactly than one near 1.
func betaHigh(count, trials, tail float64) float64 { return 1 - betaLow(trials-count, trials, tail) }
