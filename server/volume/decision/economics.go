package decision

import (
	"fmt"
	"math"
)

// Depth is what the all-or-none rule advises.
type Depth string

// The two depths of the rule.
const (
	InspectNone Depth = "none"
	InspectAll  Depth = "all"
)

// AllOrNone is Deming's kp rule for a process in control with known fraction
// nonconforming p and perfect inspection: inspect none while p < k1/k2, else
// all. k1 is the cost of inspecting a unit, k2 that of an escape. Source:
// Deming, Out of the Crisis, ch. 15.
func AllOrNone(p, k1, k2 float64) Depth {
	if p*k2 < k1 {
		return InspectNone
	}
	return InspectAll
}

// AllOrNoneBreakEven is k1/k2, the fraction where both depths cost the same.
func AllOrNoneBreakEven(k1, k2 float64) float64 { return k1 / k2 }

// CostWithout is the cost per unit of inspecting none: p k2.
func CostWithout(p, k2 float64) float64 { return p * k2 }

// CostAllWithReplacement is the cost per good unit of inspecting all when
// every bad unit found is replaced by a fresh, inspected draw: k1/(1-p).
// Source: Barlow, Engineering Reliability, section 5.3.
func CostAllWithReplacement(p, k1 float64) float64 { return k1 / (1 - p) }

// CostImperfect is the cost per unit of inspecting all with imperfect
// inspection: k1 + p miss k2 + (1-p) falseReject value, where value is what a
// good unit thrown away costs. Source: follows from the rule above by
// expectation.
func CostImperfect(p, k1, k2, miss, falseReject, value float64) float64 {
	return k1 + p*miss*k2 + (1-p)*falseReject*value
}

// Taguchi is the quadratic loss function k (y - Target)^2. Source: Taguchi,
// Introduction to Quality Engineering, 1986.
type Taguchi struct {
	K      float64 // money per squared unit of the characteristic
	Target float64
}

// NewTaguchi sets k = cost/tolerance^2: at the tolerance (half width, same
// unit as the characteristic) the loss is cost.
func NewTaguchi(target, tolerance, cost float64) (Taguchi, error) {
	if !(tolerance > 0) {
		return Taguchi{}, fmt.Errorf("tolerance %v; want above 0", tolerance)
	}
	return Taguchi{cost / (tolerance * tolerance), target}, nil
}

// Loss is the loss of one unit at y.
func (l Taguchi) Loss(y float64) float64 { return l.K * (y - l.Target) * (y - l.Target) }

// MeanLoss is the mean loss of a process: k (sigma^2 + (mean-target)^2).
func (l Taguchi) MeanLoss(mean, sigma float64) float64 { return l.K*sigma*sigma + l.Loss(mean) }

// Ownership is the cost of owning a machine over its life, in the manner of
// SEMI E35: total outlay over good units.
type Ownership struct {
	FixedPerYear, RunningPerYear, YieldLossPerYear float64 // money
	ThroughputPerHour, HoursPerYear                float64
	Uptime, Utilisation, Yield                     float64 // shares
}

// CostPerGoodUnit is (fixed + running + yield loss)/(throughput hours uptime
// utilisation yield).
func (o Ownership) CostPerGoodUnit() float64 {
	return (o.FixedPerYear + o.RunningPerYear + o.YieldLossPerYear) /
		(o.ThroughputPerHour * o.HoursPerYear * o.Uptime * o.Utilisation * o.Yield)
}

// Crossover is the quantity where two straight cost lines meet, in the unit
// the variable costs are given in (good units, if they are per good unit):
// (fixedB - fixedA)/(variableA - variableB). ok is false for parallel lines
// and where they meet below zero.
func Crossover(fixedA, variableA, fixedB, variableB float64) (quantity float64, ok bool) {
	quantity = (fixedB - fixedA) / (variableA - variableB)
	return quantity, quantity > 0 && !math.IsInf(quantity, 0)
}
