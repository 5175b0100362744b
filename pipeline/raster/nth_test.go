package raster

import (
	"math/rand/v2"
	"slices"
	"testing"
)

func TestNthAgainstSorting(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 2))
	for range 2000 {
		v := make([]float64, 1+r.IntN(70))
		for i := range v {
			v[i] = float64(r.IntN(20)) // many alike
		}
		sorted := slices.Sorted(slices.Values(v))
		k := r.IntN(len(v))
		if got := Nth(slices.Clone(v), k); got != sorted[k] {
			t.Fatalf("%v: %d-th is %v, want %v", v, k, got, sorted[k])
		}
		if got, want := quickMedian(slices.Clone(v)), median(sorted); got != want {
			t.Fatalf("%v: median %v, want %v", v, got, want)
		}
	}
}
