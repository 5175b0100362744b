package calibrate

import (
	"math/rand/v2"
	"slices"
	"testing"
)

func TestMiddleIsThatOfSortedValues(t *testing.T) {
	rnd := rand.New(rand.NewPCG(3, 5))
	for n := 1; n < 60; n++ {
		for _, distinct := range []int{1, 3, 1000} {
			v := make([]float32, n)
			for i := range v {
				v[i] = float32(rnd.IntN(distinct))
			}
			want := slices.Sorted(slices.Values(v))[n/2]
			if got := middle(v); got != want {
				t.Fatalf("%d values: got %v, want %v", n, got, want)
			}
		}
	}
}
