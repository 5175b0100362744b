package main

import (
	"math/rand/v2"

	"lapgate/server/yield"
)

// bootstrapRounds is how often the pictures are drawn anew.
const bootstrapRounds = 4000

// bootstrap returns the 95 % percentile interval (Efron 1979) of a statistic of n things
// that are drawn with replacement; of is given their numbers.
func bootstrap(n int, of func(drawn []int) float64) yield.Interval {
	r := rand.New(rand.NewPCG(1, 2))
	drawn := make([]int, n)
	values := make([]float64, bootstrapRounds)
	for i := range values {
		for k := range drawn {
			drawn[k] = r.IntN(n)
		}
		values[i] = of(drawn)
	}
	return yield.Interval{Low: quantile(values, (1-confidence)/2), High: quantile(values, (1+confidence)/2)}
}
