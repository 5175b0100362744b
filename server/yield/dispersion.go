package yield

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Dispersion is the chi-square test of whether lots share one rate.
type Dispersion struct {
	ChiSquare        float64
	DegreesOfFreedom int     // lots - 1
	PValue           float64 // 1 when there is nothing to test
}

// disperse sums (k - n p)² / (n p (1-p)) over lots with the pooled rate p. The chi-square law is an
// approximation: lots of one rate are called scattered 3 to 6 % of the time at the 5 % level (2000 drawn sets each of
// 5 to 100 lots with 0.2 to 2 expected events a lot).
func disperse(lots []Lot) Dispersion {
	count, units := sums(lots)
	if len(lots) < 2 || count == 0 || count == units {
		return Dispersion{DegreesOfFreedom: max(0, len(lots)-1), PValue: 1}
	}
	p := float64(count) / float64(units)
	d := Dispersion{DegreesOfFreedom: len(lots) - 1}
	for _, lot := range lots {
		n := float64(lot.Units)
		off := float64(lot.Count) - n*p
		d.ChiSquare += off * off / (n * p * (1 - p))
	}
	d.PValue = distuv.ChiSquared{K: float64(d.DegreesOfFreedom)}.Survival(d.ChiSquare)
	return d
}

// intraLotCorrelation is the analysis-of-variance estimator of ρ, cut to [0, 1] (Ridout, Demétrio & Firth 1999):
//
//	ρ = (MSB - MSW) / (MSB + (n0-1) MSW),  n0 = (N - Σn²/N) / (lots-1)
//
// with the mean squares between and within lots of the units' zeros and ones. Want two lots or more.
func intraLotCorrelation(lots []Lot) float64 {
	count, units := sums(lots)
	total, groups := float64(units), float64(len(lots))
	p := float64(count) / total
	between, within := 0.0, 0.0
	for _, lot := range lots {
		n := float64(lot.Units)
		q := float64(lot.Count) / n
		between += n * (q - p) * (q - p)
		within += n * q * (1 - q)
	}
	if total == groups {
		return 0 // one unit a lot: nothing within a lot to correlate
	}
	msb, msw := between/(groups-1), within/(total-groups)
	n0 := (total - squares(lots)/total) / (groups - 1)
	return math.Max(0, math.Min(1, (msb-msw)/(msb+(n0-1)*msw)))
}

func designEffect(lots []Lot, correlation float64) float64 {
	_, units := sums(lots)
	return 1 + (squares(lots)/float64(units)-1)*correlation
}

// squares is Σn².
func squares(lots []Lot) float64 {
	total := 0.0
	for _, lot := range lots {
		total += float64(lot.Units) * float64(lot.Units)
	}
	return total
}
