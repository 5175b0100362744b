package sampling

import (
	"fmt"
	"math"
)

// CSP1 is Dodge's continuous sampling plan: inspect every unit until Clearance
// units in a row conform, then a share Fraction of the units at random until
// one does not, then every unit again. Source: Dodge 1943, MIL-STD-1235.
type CSP1 struct {
	Clearance int     // i: units in a row that must conform
	Fraction  float64 // f: share inspected while sampling, 0 < f <= 1
}

// ScreeningRun is u, the expected number of units in a spell of 100 %
// inspection: (1-q^i)/(p q^i).
func (c CSP1) ScreeningRun(p float64) float64 {
	clear := c.clearChance(p)
	return (1 - clear) / (p * clear)
}

// SamplingRun is v, the expected number of units that pass in a spell of
// sampling: 1/(f p).
func (c CSP1) SamplingRun(p float64) float64 { return 1 / (c.Fraction * p) }

// FractionInspected is F = f/(f+(1-f) q^i), the long-run share inspected.
func (c CSP1) FractionInspected(p float64) float64 {
	return c.Fraction / (c.Fraction + (1-c.Fraction)*c.clearChance(p))
}

// AcceptProbability is v/(u+v): the share of units that pass while sampling.
func (c CSP1) AcceptProbability(p float64) float64 {
	u, v := c.ScreeningRun(p), c.SamplingRun(p)
	return v / (u + v)
}

// AverageOutgoingQuality is p(1-F): found units are replaced by good ones.
func (c CSP1) AverageOutgoingQuality(p float64) float64 {
	return p * (1 - c.FractionInspected(p))
}

// OutgoingLimit is the AOQL and the incoming quality where it is reached.
func (c CSP1) OutgoingLimit() (limit, at float64) { return maximise(c.AverageOutgoingQuality) }

func (c CSP1) clearChance(p float64) float64 { return math.Pow(1-p, float64(c.Clearance)) }

// FindClearance is the smallest clearance number whose AOQL at the sampling
// fraction is not above limit.
func FindClearance(fraction, limit float64) (CSP1, error) {
	if !(fraction > 0 && fraction < 1 && limit > 0 && limit < 1) {
		return CSP1{}, fmt.Errorf("fraction %v and limit %v must lie between 0 and 1", fraction, limit)
	}
	within := func(i int) bool { aoql, _ := CSP1{i, fraction}.OutgoingLimit(); return aoql <= limit }
	high := 1
	for !within(high) {
		if high *= 2; high > 1<<22 {
			return CSP1{}, fmt.Errorf("no clearance number below %d holds the outgoing limit %v", high, limit)
		}
	}
	low := high / 2
	for high-low > 1 {
		if mid := (low + high) / 2; within(mid) {
			high = mid
		} else {
			low = mid
		}
	}
	return CSP1{high, fraction}, nil
}
