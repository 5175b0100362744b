package calibrate

import "lapgate/pipeline/raster"

// middle returns the element that would stand at len(v)/2 if v were sorted, and
// reorders v (Hoare's selection). v is not empty and holds no NaN.
func middle(v []float32) float32 {
	k, low, high := len(v)/2, 0, len(v)-1
	for low < high {
		pivot := medianOfThree(v[low], v[(low+high)/2], v[high])
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
				i, j = i+1, j-1
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

func medianOfThree(a, b, c float32) float32 { return max(min(a, b), min(max(a, b), c)) }

// medianOf returns the median of a plane.
func medianOf(p *raster.Plane) float64 { return float64(middle(p.Clone().Pix)) }
