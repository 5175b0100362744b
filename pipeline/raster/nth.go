package raster

// Nth puts v into an order in which v[k] is what it would be if v were sorted, with nothing
// larger before and nothing smaller behind it, and returns it (quickselect; Hoare 1961).
// v holds no NaN, and k is one of its indices.
func Nth[T float32 | float64](v []T, k int) T {
	low, high := 0, len(v)-1
	for low < high {
		pivot := v[(low+high)/2]
		i, j := low, high
		for i <= j {
			for v[i] < pivot {
				i++
			}
			for v[j] > pivot {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			high = j
		case k >= i:
			low = i
		default:
			return v[k]
		}
	}
	return v[k]
}

// quickMedian is median without sorting v.
func quickMedian(v []float64) float64 {
	n := len(v)
	upper := Nth(v, n/2)
	if n%2 == 1 {
		return upper
	}
	lower := v[0]
	for _, x := range v[1 : n/2] {
		lower = max(lower, x)
	}
	return (upper + lower) / 2
}
