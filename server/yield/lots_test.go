package yield

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

var scattered = []Lot{{48, 50}, {30, 50}, {49, 50}, {40, 45}, {59, 60}, {35, 50}}

func TestDispersionAgainstLibrary(t *testing.T) {
	count, units := sums(scattered)
	p := float64(count) / float64(units)
	var observed, expected []float64
	for _, lot := range scattered {
		n := float64(lot.Units)
		observed = append(observed, float64(lot.Count), n-float64(lot.Count))
		expected = append(expected, n*p, n*(1-p))
	}
	got := disperse(scattered)
	near(t, "chi-square", got.ChiSquare, stat.ChiSquare(observed, expected), 1e-9)
	if got.DegreesOfFreedom != 5 || got.PValue > 1e-6 {
		t.Errorf("got %+v", got)
	}
	// Printed tables: the 5 % point of chi-square with 1 degree of freedom is 3.841. Lots 10 ± d of 20 give d²/5.
	near(t, "p-value", distuv.ChiSquared{K: 1}.Survival(3.841), 0.05, 1e-4)
	near(t, "two lots", disperse([]Lot{{6, 20}, {14, 20}}).ChiSquare, 2*16.0/5, 1e-12)
}

// slowCorrelation writes every unit out as 0 or 1 and does the one-way analysis of variance over them.
func slowCorrelation(lots []Lot) float64 {
	var all []float64
	groups := make([][]float64, len(lots))
	for i, lot := range lots {
		for u := range lot.Units {
			value := 0.0
			if u < lot.Count {
				value = 1
			}
			groups[i] = append(groups[i], value)
			all = append(all, value)
		}
	}
	grand, between, within, squares := stat.Mean(all, nil), 0.0, 0.0, 0.0
	for _, group := range groups {
		n, mean := float64(len(group)), stat.Mean(group, nil)
		squares += n * n
		for _, value := range group {
			between += (mean - grand) * (mean - grand)
			within += (value - mean) * (value - mean)
		}
	}
	total, m := float64(len(all)), float64(len(lots))
	msb, msw := between/(m-1), within/(total-m)
	n0 := (total - squares/total) / (m - 1)
	return (msb - msw) / (msb + (n0-1)*msw)
}

func TestIntraLotCorrelation(t *testing.T) {
	near(t, "scattered", intraLotCorrelation(scattered), slowCorrelation(scattered), 1e-9)
	near(t, "all or none", intraLotCorrelation([]Lot{{20, 20}, {0, 20}, {20, 20}}), 1, 1e-12)
	near(t, "all alike", intraLotCorrelation([]Lot{{10, 20}, {10, 20}}), 0, 0)
	near(t, "one unit a lot", intraLotCorrelation([]Lot{{1, 1}, {0, 1}}), 0, 0)
}

func TestPoolLotsWidens(t *testing.T) {
	got := must[PooledRate](t)(PoolLots(scattered, 0.95))
	plain := must[Interval](t)(ClopperPearson(got.Count, got.Units, 0.95))
	if got.Method != BetaBinomial || got.Interval.Low >= plain.Low || got.Interval.High <= plain.High {
		t.Errorf("got %+v, plain %v", got, plain)
	}
	if got.EffectiveUnits >= float64(got.Units) || !strings.Contains(got.Why, "scatter more than chance") {
		t.Errorf("got %+v", got)
	}
}

// Lots of 20 that are good or bad as a whole carry one unit each: 60 / 20 = 3 units, less by Student's 97.5 % points
// 2.00100 (59 degrees of freedom) and 4.30265 (2), as in printed tables.
func TestPoolLotsEffectiveUnits(t *testing.T) {
	got := must[PooledRate](t)(PoolLots([]Lot{{20, 20}, {0, 20}, {20, 20}}, 0.95))
	near(t, "correlation", got.Correlation, 1, 1e-12)
	near(t, "design effect", got.DesignEffect, 20, 1e-9)
	near(t, "effective units", got.EffectiveUnits, 3*math.Pow(2.00100/4.30265, 2), 1e-5)
}

func TestPoolLotsFallsBack(t *testing.T) {
	for why, lots := range map[string][]Lot{
		"no more than chance": {{48, 50}, {47, 50}, {49, 50}},
		"cannot be seen":      {{48, 50}, {0, 0}},
		"alike":               {{50, 50}, {40, 40}},
		"0 lot":               {},
	} {
		got := must[PooledRate](t)(PoolLots(lots, 0.95))
		plain := must[Interval](t)(ClopperPearson(got.Count, got.Units, 0.95))
		if got.Method != Binomial || !strings.Contains(got.Why, why) {
			t.Errorf("%s: got %+v", why, got)
		}
		nearInterval(t, why, got.Interval, plain.Low, plain.High, 1e-12)
	}
}

// coverageOfLots draws lots with a fixed seed whose rates follow a Beta law, and gives the shares of intervals
// (PoolLots, plain Clopper-Pearson) that hold the mean, and the share called scattered.
func coverageOfLots(t *testing.T, lots, units int, mean, rho float64) (pooled, plain, flagged float64) {
	source := rand.NewPCG(5, 6)
	const draws = 2000
	for range draws {
		drawn := make([]Lot, lots)
		for i := range drawn {
			rate := mean
			if rho > 0 {
				strength := 1/rho - 1
				rate = distuv.Beta{Alpha: mean * strength, Beta: (1 - mean) * strength, Src: source}.Rand()
			}
			drawn[i] = Lot{Count: int(distuv.Binomial{N: float64(units), P: rate, Src: source}.Rand()), Units: units}
		}
		got := must[PooledRate](t)(PoolLots(drawn, 0.95))
		if got.Interval.Contains(mean) {
			pooled += 1.0 / draws
		}
		if must[Interval](t)(ClopperPearson(got.Count, got.Units, 0.95)).Contains(mean) {
			plain += 1.0 / draws
		}
		if got.Method == BetaBinomial {
			flagged += 1.0 / draws
		}
	}
	return pooled, plain, flagged
}

func TestPoolLotsCoverage(t *testing.T) {
	for _, c := range []struct {
		lots, units       int
		mean, rho         float64
		least, plainBelow float64
	}{
		{12, 50, 0.95, 0.10, 0.90, 0.65},
		{20, 100, 0.97, 0.03, 0.92, 0.75},
		{20, 40, 0.95, 0.00, 0.94, 1.01},
	} {
		pooled, plain, flagged := coverageOfLots(t, c.lots, c.units, c.mean, c.rho)
		name := fmt.Sprintf("%d lots of %d, mean %v, correlation %v", c.lots, c.units, c.mean, c.rho)
		t.Logf("%s: coverage %.3f, plain %.3f, called scattered %.3f", name, pooled, plain, flagged)
		if pooled < c.least || plain >= c.plainBelow || pooled < plain-0.001 {
			t.Errorf("%s: coverage %v (want %v or more), plain %v (want below %v)", name, pooled, c.least, plain, c.plainBelow)
		}
		if c.rho == 0 && flagged > 0.08 {
			t.Errorf("%s: called scattered %v, want near %v", name, flagged, DispersionLevel)
		}
	}
}

func TestPoolLotsRefuses(t *testing.T) {
	_, err := PoolLots([]Lot{{1, 2}, {3, 2}}, 0.95)
	wantError(t, "3 of 2", err)
	_, err = PoolLots(nil, 0)
	wantError(t, "confidence", err)
}
