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
	for trial := range 3000 {
		v, s := make([]float32, 1+r.IntN(60)), []float64{}
		for i := range v {
			v[i] = float32(r.IntN(1 + r.IntN(30)))
			switch trial % 4 {
			case 1:
				v[i] = 1000 + float32(r.NormFloat64())
			case 2:
				v[i] = float32(r.NormFloat64() * math.Pow(10, 4*r.Float64()))
			}
			s = append(s, float64(v[i]))
		}
		slices.Sort(s)
		want := mean(s[len(s)/4 : len(s)-len(s)/4])
		if got := middleMean(v); math.Abs(got-want) > 1e-6*max(math.Abs(s[0]), s[len(s)-1], 1) {
			t.Fatalf("%v: got %g, want %g", v, got, want)
		}
		if got, want := median(v), s[len(s)/2]; float64(got) != want {
			t.Fatalf("%v: got %g, want %g", v, got, want)
		}
	}
}
