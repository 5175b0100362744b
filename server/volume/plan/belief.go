package plan

import (
	"errors"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/stat/distuv"
)

// Share is a probability with what is known of it: exactly one of a value,
// counts, or a Beta.
type Share struct {
	Value *float64 `yaml:"value"`
	Count *Count   `yaml:"count"`
	Beta  *Beta    `yaml:"beta"`
}

// Count is k of n trials.
type Count struct {
	K int `yaml:"k"`
	N int `yaml:"n"`
}

// Beta is a Beta distribution.
type Beta struct {
	Alpha float64 `yaml:"alpha"`
	Beta  float64 `yaml:"beta"`
}

// Belief is what is known of a share: a value, a Beta, or a weighted sum of
// independent beliefs.
type Belief struct {
	value float64
	beta  *Beta
	parts []part
}

type part struct {
	weight float64
	of     Belief
}

// Certain is a share known without doubt.
func Certain(value float64) Belief { return Belief{value: value} }

// FromCount is k of n: the value is k/n, the doubt the posterior
// Beta(k+1/2, n-k+1/2) under Jeffreys' prior (Jeffreys 1946; Brown, Cai and
// DasGupta 2001 for its coverage).
func FromCount(c Count) Belief {
	return Belief{float64(c.K) / float64(c.N), &Beta{float64(c.K) + 0.5, float64(c.N-c.K) + 0.5}, nil}
}

// FromBeta is a Beta with its mean as the value.
func FromBeta(b Beta) Belief { return Belief{value: b.Alpha / (b.Alpha + b.Beta), beta: &b} }

// Belief turns what the file says into what is known; nothing said is zero.
func (s Share) Belief() Belief {
	switch {
	case s.Count != nil:
		return FromCount(*s.Count)
	case s.Beta != nil:
		return FromBeta(*s.Beta)
	case s.Value != nil:
		return Certain(*s.Value)
	}
	return Certain(0)
}

// Value is the best single figure.
func (b Belief) Value() float64 {
	if b.parts == nil {
		return b.value
	}
	sum := 0.0
	for _, p := range b.parts {
		sum += p.weight * p.of.Value()
	}
	return sum
}

// Certain says whether there is no doubt.
func (b Belief) Certain() bool {
	for _, p := range b.parts {
		if !p.of.Certain() {
			return false
		}
	}
	return b.beta == nil
}

// Moments are the mean and the variance of the doubt.
func (b Belief) Moments() (mean, variance float64) {
	if b.beta != nil {
		d := distuv.Beta{Alpha: b.beta.Alpha, Beta: b.beta.Beta}
		return d.Mean(), d.Variance()
	}
	mean = b.value
	for _, p := range b.parts {
		m, v := p.of.Moments()
		mean, variance = mean+p.weight*m, variance+p.weight*p.weight*v
	}
	return mean, variance
}

// Quantile is the q point of the doubt. For a sum of Betas it is that of the
// Beta with the same mean and variance.
func (b Belief) Quantile(q float64) float64 {
	if b.beta != nil {
		return distuv.Beta{Alpha: b.beta.Alpha, Beta: b.beta.Beta}.Quantile(q)
	}
	mean, variance := b.Moments()
	if variance <= 0 || mean <= 0 || mean >= 1 {
		return mean
	}
	size := mean*(1-mean)/variance - 1
	return distuv.Beta{Alpha: mean * size, Beta: (1 - mean) * size}.Quantile(q)
}

// Interval is the central interval of the given probability.
func (b Belief) Interval(level float64) (low, high float64) {
	return b.Quantile((1 - level) / 2), b.Quantile((1 + level) / 2)
}

// Draw is one random value.
func (b Belief) Draw(src rand.Source) float64 {
	if b.beta != nil {
		return distuv.Beta{Alpha: b.beta.Alpha, Beta: b.beta.Beta, Src: src}.Rand()
	}
	sum := b.value
	for _, p := range b.parts {
		sum += p.weight * p.of.Draw(src)
	}
	return sum
}

// RoganGladen corrects an apparent share of rejects for misses and false
// rejects: (r - falseReject)/(1 - miss - falseReject), held inside 0..1.
// Source: Rogan and Gladen 1978. Youden's index must be above zero.
func RoganGladen(apparent, falseReject, miss float64) (float64, error) {
	youden := 1 - miss - falseReject
	if !(youden > 0) {
		return 0, errors.New("misses and false rejects add up to 1 or more: verdicts tell nothing about the units")
	}
	return math.Min(1, math.Max(0, (apparent-falseReject)/youden)), nil
}
