package main

import (
	"math/rand/v2"

	"lapgate/server/yield"
)

// bootstrapRounds is how often the things are drawn anew.
const bootstrapRounds = 4000

// bootstrap returns the 95 % percentile interval (Efron 1979) of a statistic of n things
// that are drawn with replacement; of is given their numbers.
func bootstrap(n int, of func(drawn []int) float64) yield.Interval {
	return bootstrapBoth(n, 0, func(drawn, _ []int) float64 { return of(drawn) })
}

// bootstrapBoth is bootstrap of two sets, each of which is drawn by itself.
func bootstrapBoth(n, m int, of func(a, b []int) float64) yield.Interval {
	r := rand.New(rand.NewPCG(1, 2))
	a, b := make([]int, n), make([]int, m)
	values := make([]float64, bootstrapRounds)
	for i := range values {
		for k := range a {
			a[k] = r.IntN(n)
		}
		for k := range b {
			b[k] = r.IntN(m)
		}
		values[i] = of(a, b)
	}
	return yield.Interval{Low: quantile(values, (1-confidence)/2), High: quantile(values, (1+confidence)/2)}
}
