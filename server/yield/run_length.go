package yield

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
)

// RunLength is the mean number of points until one falls outside the limits when the true rate is rate:
// 1 / P(outside), with the binomial (p) or Poisson (u, c) probabilities of the counts outside. At rate = centre
// this is the in-control run length; it is far from the 370 of normal data when counts are small. +Inf if no count signals.
// It takes the centre as known and points as independent with no scatter but chance; see RunLengthScattered.
func (l Limits) RunLength(rate float64) (float64, error) {
	if err := checkLimits(l.Kind, rate, l.Size); err != nil {
		return 0, err
	}
	return 1 / l.signalAt(rate), nil
}

// RunLengthScattered is the run length of a p chart when the rate itself moves from point to point with mean
// rate and standard deviation sd, as a Beta law: counts outside then have beta-binomial probabilities. It takes time in proportion to the sample size.
func (l Limits) RunLengthScattered(rate, sd float64) (float64, error) {
	if l.Kind != ChartP {
		return 0, fmt.Errorf("chart %q: a scattered rate is worked out for %q only", l.Kind, ChartP)
	}
	if err := checkLimits(l.Kind, rate, l.Size); err != nil {
		return 0, err
	}
	if !(sd > 0 && sd*sd < rate*(1-rate)) {
		return 0, fmt.Errorf("standard deviation %v of a rate %v: want above 0 and below √(rate (1-rate))", sd, rate)
	}
	strength := rate*(1-rate)/(sd*sd) - 1
	least, most := l.inside()
	return 1 / math.Max(0, 1-betaBinomialBetween(least, most, l.Size, rate*strength, (1-rate)*strength)), nil
}

// betaBinomialBetween is P(least <= count <= most) of n units when the rate follows a Beta law with shapes a and b.
// Logarithms of the single probabilities are built up from count 0, which stays exact where shapes are large:
//
//	P(0) = Π (b+i)/(a+b+i), i = 0 … n-1;  P(k+1)/P(k) = (n-k)(a+k) / ((k+1)(b+n-k-1))
func betaBinomialBetween(least, most int, n, a, b float64) float64 {
	log := 0.0
	for i := range int(n) {
		log += math.Log1p(-a / (a + b + float64(i)))
	}
	sum := 0.0
	for count := range most + 1 {
		if count >= least {
			sum += math.Exp(log)
		}
		k := float64(count)
		log += math.Log((n - k) * (a + k) / ((k + 1) * (b + n - k - 1)))
	}
	return sum
}

// signalAt is the probability that one point lies outside when the true rate is rate.
func (l Limits) signalAt(rate float64) float64 {
	least, most := l.inside()
	return l.atMost(least-1, rate) + l.atLeast(most+1, rate)
}

// inside gives the least and the most count that do not signal, by the chart's own comparison, so that
// rounding cannot make the two disagree: the product with the size is at most one count off.
func (l Limits) inside() (least, most int) {
	least = max(0, int(math.Ceil(l.Low*l.Size))-1)
	most = int(math.Floor(l.High*l.Size)) + 1
	if l.Kind == ChartP {
		most = min(most, int(l.Size))
	}
	for range 2 {
		if l.beyond(least) {
			least++
		}
		if l.beyond(most) {
			most--
		}
	}
	return least, most
}

// atLeast is P(count >= k) at the true rate, from the incomplete beta (p) or gamma (u, c) function.
func (l Limits) atLeast(k int, rate float64) float64 {
	switch {
	case k <= 0:
		return 1
	case rate == 0 || l.Kind == ChartP && float64(k) > l.Size:
		return 0
	case l.Kind == ChartP && rate == 1:
		return 1
	case l.Kind == ChartP:
		return mathext.RegIncBeta(float64(k), l.Size-float64(k)+1, rate)
	}
	return mathext.GammaIncReg(float64(k), rate*l.Size)
}

// atMost is P(count <= k) at the true rate.
func (l Limits) atMost(k int, rate float64) float64 {
	switch {
	case k < 0:
		return 0
	case rate == 0 || l.Kind == ChartP && float64(k) >= l.Size:
		return 1
	case l.Kind == ChartP && rate == 1:
		return 0
	case l.Kind == ChartP:
		return mathext.RegIncBeta(l.Size-float64(k), float64(k)+1, 1-rate)
	}
	return mathext.GammaIncRegComp(float64(k)+1, rate*l.Size)
}
