package decision

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Line is the cost of one choice as a straight line in an unknown share p:
// Fixed + Slope p, in money.
type Line struct{ Fixed, Slope float64 }

// At is the cost at share p.
func (l Line) At(p float64) float64 { return l.Fixed + l.Slope*p }

// PerfectLinear is the expected value of perfect information on p for two
// choices whose costs are straight in p, with p ~ Beta(alpha, beta). Closed:
// the losing side of the break-even share p0 is integrated by incomplete
// betas, E[max(0, s (p - p0))]. Source: Raiffa and Schlaifer 1961, ch. 5.
func PerfectLinear(a, b Line, alpha, beta float64) float64 {
	slope, fixed := b.Slope-a.Slope, b.Fixed-a.Fixed // b's extra cost
	mean := alpha / (alpha + beta)
	if slope == 0 {
		return 0
	}
	p0 := math.Min(1, math.Max(0, -fixed/slope))
	below := distuv.Beta{Alpha: alpha, Beta: beta}.CDF(p0)
	meanBelow := mean * distuv.Beta{Alpha: alpha + 1, Beta: beta}.CDF(p0)
	lossBelow := fixed*below + slope*meanBelow // E[extra; p < p0]
	lossAbove := fixed + slope*mean - lossBelow
	return math.Max(0, math.Min(0, fixed+slope*mean)-math.Min(0, lossBelow)-math.Min(0, lossAbove))
}

// SampleLinear is the expected value of n Bernoulli(p) observations for the
// same choice: over the beta-binomial distribution of successes k the better
// choice at the posterior mean (alpha+k)/(alpha+beta+n) is taken. Closed.
// Source: Raiffa and Schlaifer 1961, ch. 5.
func SampleLinear(a, b Line, alpha, beta float64, n int) float64 {
	mean := alpha / (alpha + beta)
	preposterior := 0.0
	for k := 0; k <= n; k++ {
		posterior := (alpha + float64(k)) / (alpha + beta + float64(n))
		preposterior += BetaBinomial(k, n, alpha, beta) * math.Min(a.At(posterior), b.At(posterior))
	}
	return math.Max(0, math.Min(a.At(mean), b.At(mean))-preposterior)
}

// BetaBinomial is the probability of k successes in n trials whose share is
// Beta(alpha, beta): C(n,k) B(k+alpha, n-k+beta)/B(alpha, beta).
func BetaBinomial(k, n int, alpha, beta float64) float64 {
	return math.Exp(logChoose(n, k) + logBeta(float64(k)+alpha, float64(n-k)+beta) - logBeta(alpha, beta))
}

// Nodes is an unknown held as equally likely points, with the cost of every
// choice at each point; for costs that are not straight in the unknown.
type Nodes struct {
	Success []float64   // chance that one observation succeeds, per point
	Cost    [][]float64 // money, choice by point
}

// Check refuses ragged or empty input.
func (n Nodes) Check() error {
	if len(n.Success) == 0 || len(n.Cost) == 0 {
		return errors.New("value of information: want at least one point and one choice")
	}
	for _, costs := range n.Cost {
		if len(costs) != len(n.Success) {
			return errors.New("value of information: every choice needs one cost per point")
		}
	}
	return nil
}

// Perfect is the expected value of perfect information: the least mean cost
// less the mean of the least costs. Source: Raiffa and Schlaifer 1961, ch. 4.
func (n Nodes) Perfect() float64 {
	mean, weights := 0.0, make([]float64, len(n.Success))
	for j := range n.Success {
		weights[j] = 1 / float64(len(n.Success))
		least := math.Inf(1)
		for _, costs := range n.Cost {
			least = math.Min(least, costs[j])
		}
		mean += weights[j] * least
	}
	return math.Max(0, n.least(weights)-mean)
}

// Sample is the expected value of m more observations, each a success with
// the point's chance: the prior's least cost less the mean over the possible
// counts of the posterior's least cost. Source: as Perfect.
func (n Nodes) Sample(m int) float64 {
	prior, joint := make([]float64, len(n.Success)), make([]float64, len(n.Success))
	for j := range prior {
		prior[j] = 1 / float64(len(prior))
	}
	preposterior := 0.0
	for k := 0; k <= m; k++ {
		for j, q := range n.Success {
			joint[j] = prior[j] * binomial(k, m, q)
		}
		preposterior += n.least(joint)
	}
	return math.Max(0, n.least(prior)-preposterior)
}

// least is the smallest weighted cost over the choices.
func (n Nodes) least(weights []float64) float64 {
	least := math.Inf(1)
	for _, costs := range n.Cost {
		sum := 0.0
		for j, w := range weights {
			sum += w * costs[j]
		}
		least = math.Min(least, sum)
	}
	return least
}

func binomial(k, n int, q float64) float64 {
	switch {
	case q <= 0:
		return one(k == 0)
	case q >= 1:
		return one(k == n)
	}
	return math.Exp(logChoose(n, k) + float64(k)*math.Log(q) + float64(n-k)*math.Log1p(-q))
}

func one(yes bool) float64 {
	if yes {
		return 1
	}
	return 0
}

func logChoose(n, k int) float64 {
	return -math.Log(float64(n+1)) - logBeta(float64(k+1), float64(n-k+1))
}

func logBeta(a, b float64) float64 {
	la, _ := math.Lgamma(a)
	lb, _ := math.Lgamma(b)
	lab, _ := math.Lgamma(a + b)
	return la + lb - lab
}
