package sampling

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// AcceptProbability is the chance that a lot is accepted when each unit is
// nonconforming with probability p: the binomial operating characteristic,
// sum over d <= Accept of C(N,d) p^d (1-p)^(N-d).
func (s SinglePlan) AcceptProbability(p float64) float64 {
	return BinomialAtMost(s.Accept, s.N, p)
}

// AcceptProbabilityPoisson is the same for nonconformities counted per unit,
// mean N*rate: the Poisson operating characteristic.
func (s SinglePlan) AcceptProbabilityPoisson(rate float64) float64 {
	return distuv.Poisson{Lambda: float64(s.N) * rate}.CDF(float64(s.Accept))
}

// BinomialAtMost is P(X <= k) for X binomial(n, p). It sums the terms, which
// for the small k of sampling plans is faster than the incomplete beta.
func BinomialAtMost(k, n int, p float64) float64 {
	switch {
	case k < 0:
		return 0
	case k >= n || p <= 0:
		return 1
	case p >= 1:
		return 0
	}
	if logFirst := float64(n) * math.Log1p(-p); logFirst > -600 {
		return sumTerms(k, n, p, math.Exp(logFirst))
	}
	return distuv.Beta{Alpha: float64(n - k), Beta: float64(k + 1)}.CDF(1 - p)
}

func sumTerms(k, n int, p, term float64) float64 {
	sum, odds := term, p/(1-p)
	for d := 1; d <= k; d++ {
		term *= odds * float64(n-d+1) / float64(d)
		sum += term
	}
	return math.Min(sum, 1)
}

// QualityAt is the fraction nonconforming whose lots are accepted with
// probability accept: the inverse of AcceptProbability, by the identity
// between binomial and beta distributions.
func (s SinglePlan) QualityAt(accept float64) float64 {
	return distuv.Beta{Alpha: float64(s.Accept + 1), Beta: float64(s.N - s.Accept)}.Quantile(1 - accept)
}

// AverageOutgoingQuality is the fraction nonconforming after rectifying
// inspection (rejected lots screened, bad units replaced) of lots of lot
// units: Pa p (lot-N)/lot. Source: Montgomery, Statistical Quality Control,
// chapter on acceptance sampling.
func (s SinglePlan) AverageOutgoingQuality(p float64, lot int) float64 {
	return s.AcceptProbability(p) * p * float64(lot-s.N) / float64(lot)
}

// AverageTotalInspection is the expected units inspected per lot under
// rectifying inspection: N + (1-Pa)(lot-N). Source: as above.
func (s SinglePlan) AverageTotalInspection(p float64, lot int) float64 {
	return float64(s.N) + (1-s.AcceptProbability(p))*float64(lot-s.N)
}

// OutgoingLimit is the largest average outgoing quality over all incoming p
// (AOQL) and the p where it is reached.
func (s SinglePlan) OutgoingLimit(lot int) (limit, at float64) {
	return maximise(func(p float64) float64 { return s.AverageOutgoingQuality(p, lot) })
}

// FindSinglePlan is the plan of smallest sample that accepts lots of quality
// good with probability >= acceptGood and lots of quality poor with
// probability <= acceptPoor (producer's and consumer's risk points, binomial).
// Source: Kiermeier 2008, J. Stat. Software 26(6).
func FindSinglePlan(good, acceptGood, poor, acceptPoor float64) (SinglePlan, error) {
	if !(0 < good && good < poor && poor < 1 && acceptPoor < acceptGood) {
		return SinglePlan{}, errors.New("want 0 < good < poor < 1 and acceptPoor < acceptGood")
	}
	for n, c := 1, 0; n <= 1_000_000; n++ {
		for c < n && BinomialAtMost(c, n, good) < acceptGood {
			c++
		}
		if BinomialAtMost(c, n, poor) <= acceptPoor {
			return SinglePlan{N: n, Accept: c}, nil
		}
	}
	return SinglePlan{}, errors.New("no plan below 1 000 000 units separates the two qualities")
}

// maximise finds the largest value of a function with one hump on (0, 1):
// a scan on a log grid, then golden sections around its best point.
func maximise(f func(p float64) float64) (value, at float64) {
	const steps = 2000
	point := func(i int) float64 { return math.Exp(math.Log(1e-7) * (1 - float64(i)/steps)) }
	best := 0
	for i := range steps {
		if f(point(i)) > f(point(best)) {
			best = i
		}
	}
	low, high := point(best-1), point(best+1)
	golden := (math.Sqrt(5) - 1) / 2
	for range 80 {
		a, b := high-golden*(high-low), low+golden*(high-low)
		if f(a) > f(b) {
			high = b
		} else {
			low = a
		}
	}
	at = (low + high) / 2
	return f(at), at
}
