package yield

import (
	"fmt"
	"math"
	"slices"
)

// Percentile returns the nearest-rank percentile of values in rising order: the smallest
// of them that at least the share (0 < share ≤ 1) of them does not exceed, so a value
// that occurred. None is an error.
func Percentile(rising []float64, share float64) (float64, error) {
	if len(rising) == 0 || !(share > 0 && share <= 1) {
		return 0, fmt.Errorf("percentile: got %d values and share %v, want one value at least and a share above 0, to 1", len(rising), share)
	}
	if !slices.IsSorted(rising) {
		return 0, fmt.Errorf("percentile: the values do not rise")
	}
	rank := int(math.Ceil(share*float64(len(rising)) - 1e-9)) // 0.9 of 10 is the 9th, whatever 0.9 × 10 is in binary
	return rising[max(rank, 1)-1], nil
}
