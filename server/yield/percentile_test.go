package yield

import "testing"

// The worked example of the nearest-rank method on the ordered list 15, 20, 35, 40, 50
// (in many textbooks; values from memory).
func TestPercentile(t *testing.T) {
	list := []float64{15, 20, 35, 40, 50}
	for share, want := range map[float64]float64{0.05: 15, 0.3: 20, 0.4: 20, 0.5: 35, 1: 50} {
		if got, err := Percentile(list, share); err != nil || got != want {
			t.Errorf("%v: got %v, %v, want %v", share, got, err, want)
		}
	}
	tens := []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10}
	for share, want := range map[float64]float64{0.1: 1, 0.3: 3, 0.7: 7, 0.9: 9, 0.99: 10} {
		if got, _ := Percentile(tens, share); got != want {
			t.Errorf("%v of ten: got %v, want %v", share, got, want)
		}
	}
	for _, bad := range []struct {
		list  []float64
		share float64
	}{{nil, 0.5}, {list, 0}, {list, 1.1}, {[]float64{2, 1}, 0.5}} {
		if _, err := Percentile(bad.list, bad.share); err == nil {
			t.Errorf("%v, %v: no error", bad.list, bad.share)
		}
	}
}
