package yield

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Lot is the count of units with the property asked for (accepted, say) among the units of one lot.
type Lot struct{ Count, Units int }

// Method names how the interval of a rate over lots was computed.
type Method string

// Binomial pools the lots as one; BetaBinomial lets each lot have a rate of its own.
const (
	Binomial     Method = "binomial"
	BetaBinomial Method = "beta_binomial"
)

// DispersionLevel is the error probability at which lots are said to scatter more than chance.
const DispersionLevel = 0.05

// PooledRate is a mean rate over lots, with the interval of the method that the lots' scatter called for.
type PooledRate struct {
	Count, Units, Lots int
	Value              float64 // Count / Units; NaN without units
	Method             Method
	Why                string // one sentence for the reader
	Dispersion         Dispersion
	Correlation        float64  // intra-lot correlation, 0 for Binomial
	DesignEffect       float64  // variance of the pooled rate / its binomial variance, 1 for Binomial
	EffectiveUnits     float64  // independent units that would carry as much
	Interval           Interval // two-sided, of the mean rate
}

// PoolLots gives the mean rate over lots. A chi-square test of dispersion at DispersionLevel decides: no more
// scatter than chance gives the Clopper-Pearson interval of the sums; more gives the beta-binomial variance
//
//	design effect D = 1 + (Σn²/N - 1) ρ, effective units N/D · (t(N-1)/t(lots-1))²
//
// with the correlation ρ of intraLotCorrelation, put into the Beta quantiles of Clopper-Pearson with real counts
// (Korn & Graubard 1998; t is Student's quantile, since ρ rests on lots-1 degrees of freedom). Lots without units are left out.
//
// Scatter that the test misses leaves the interval too narrow, and with fewer than two lots it cannot be seen at all.
// Coverage of 95 % intervals over 2000 drawn sets each, Clopper-Pearson of the sums in brackets: 0.94 [0.68] for 20 lots
// of 100 at 0.97 with ρ 0.03; 0.92 [0.59] for 12 of 50 at 0.95, ρ 0.1; 0.91 [0.85] for 10 of 200 at 0.97, ρ 0.005;
// 0.82 [0.46] for 3 of 200 at 0.95, ρ 0.05: few lots say little about the next.
func PoolLots(lots []Lot, confidence float64) (PooledRate, error) {
	if err := checkConfidence(confidence); err != nil {
		return PooledRate{}, err
	}
	used, err := lotsWithUnits(lots)
	if err != nil {
		return PooledRate{}, err
	}
	count, units := sums(used)
	rate := PooledRate{Count: count, Units: units, Lots: len(used), Value: share(float64(count), float64(units)),
		Method: Binomial, DesignEffect: 1, EffectiveUnits: float64(units), Dispersion: disperse(used)}
	tail := (1 - confidence) / 2
	if rate.Dispersion.PValue < DispersionLevel {
		rate.Method = BetaBinomial
		rate.Correlation = intraLotCorrelation(used)
		rate.DesignEffect = designEffect(used, rate.Correlation)
		rate.EffectiveUnits = effectiveUnits(units, len(used), rate.DesignEffect, tail)
	}
	rate.Why = rate.why()
	rate.Interval = Interval{Low: 0, High: 1}
	if units > 0 {
		rate.Interval = betaInterval(rate.Value*rate.EffectiveUnits, rate.EffectiveUnits, tail)
	}
	return rate, nil
}

func (r PooledRate) why() string {
	d := r.Dispersion
	test := fmt.Sprintf("chi-square %.2f with %d degrees of freedom, p = %.2g", d.ChiSquare, d.DegreesOfFreedom, d.PValue)
	switch {
	case r.Lots < 2:
		return fmt.Sprintf("%d lot: scatter between lots cannot be seen, units are taken as independent", r.Lots)
	case r.Count == 0 || r.Count == r.Units:
		return fmt.Sprintf("all units of %d lots are alike: no scatter to see, units are taken as independent", r.Lots)
	case r.Method == BetaBinomial:
		return fmt.Sprintf("%d lots scatter more than chance (%s): variance taken %.3g times the binomial", r.Lots, test, r.DesignEffect)
	default:
		return fmt.Sprintf("%d lots scatter no more than chance allows (%s): units are taken as independent", r.Lots, test)
	}
}

// effectiveUnits never exceeds the units that were counted.
func effectiveUnits(units, lots int, effect, tail float64) float64 {
	ratio := studentQuantile(1-tail, units-1) / studentQuantile(1-tail, lots-1)
	return math.Min(float64(units), float64(units)/effect*ratio*ratio)
}

func studentQuantile(p float64, degrees int) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(degrees)}.Quantile(p)
}

func lotsWithUnits(lots []Lot) ([]Lot, error) {
	used := make([]Lot, 0, len(lots))
	for i, lot := range lots {
		if lot.Units < 0 || lot.Count < 0 || lot.Count > lot.Units {
			return nil, fmt.Errorf("lot %d of %d: %d of %d units: want a count between 0 and the units", i+1, len(lots), lot.Count, lot.Units)
		}
		if lot.Units > 0 {
			used = append(used, lot)
		}
	}
	return used, nil
}

func sums(lots []Lot) (count, units int) {
	for _, lot := range lots {
		count += lot.Count
		units += lot.Units
	}
	return count, units
}
