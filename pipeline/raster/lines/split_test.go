package lines

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// The mean of the middle half is that of the sorted values, ties and all.
func TestMiddleMean(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for range 3000 {
		v := make([]float64, 1+r.IntN(40))
		for i := range v {
			v[i] = float64(r.IntN(1 + r.IntN(30)))
		}
		s := slices.Sorted(slices.Values(v))
		want := mean(s[len(s)/4 : len(s)-len(s)/4])
		if got := middleMean(slices.Clone(v)); math.Abs(got-want) > 1e-12 {
			t.Fatalf("%v: got %g, want %g", v, got, want)
		}
	}
}
