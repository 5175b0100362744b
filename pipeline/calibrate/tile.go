package calibrate

import (
	"math"
	"slices"
)

// tileSide is the side in pixels of the tiles in which frames are compared.
const tileSide = 32

// tile is what two frames a and b say about one square of the image.
type tile struct {
	x0, y0, x1, y1 int
	n              int
	mean           float64 // DN, of both frames
	diff           float64 // DN, mean of b − a
	variance       float64 // DN², ½ of the unbiased variance of b − a: the temporal variance
}

// tilesOf compares two frames tile by tile.
func tilesOf(a, b []uint16, width, height int) []tile {
	var out []tile
	for y := 0; y < height; y += tileSide {
		for x := 0; x < width; x += tileSide {
			t := tile{x0: x, y0: y, x1: min(x+tileSide, width), y1: min(y+tileSide, height)}
			t.measure(a, b, width)
			if t.n > 1 {
				out = append(out, t)
			}
		}
	}
	return out
}

func (t *tile) measure(a, b []uint16, width int) {
	var sum, diff, square int64
	t.n = (t.x1 - t.x0) * (t.y1 - t.y0)
	for y := t.y0; y < t.y1; y++ {
		ra, rb := a[y*width+t.x0:y*width+t.x1], b[y*width+t.x0:y*width+t.x1]
		for x, v := range ra {
			d := int64(rb[x]) - int64(v)
			sum += int64(v) + int64(rb[x])
			diff += d
			square += d * d
		}
	}
	n := float64(t.n)
	t.mean, t.diff = float64(sum)/(2*n), float64(diff)/n
	if t.n > 1 {
		t.variance = (float64(square) - n*t.diff*t.diff) / (2 * (n - 1))
	}
}

// inliers measures the tile again without the pixels whose difference is further than
// reach from the median: blinking pixels are no movement. share is the part left out.
func (t tile) inliers(a, b []uint16, width int, reach float64) (diff, variance, share float64) {
	d := make([]float64, 0, t.n)
	for y := t.y0; y < t.y1; y++ {
		for x := t.x0; x < t.x1; x++ {
			i := y*width + x
			d = append(d, float64(b[i])-float64(a[i]))
		}
	}
	slices.Sort(d)
	middle := d[len(d)/2]
	kept := slices.DeleteFunc(d, func(v float64) bool { return math.Abs(v-middle) > reach })
	mean, sd := meanAndSD(kept)
	return mean, sd * sd / 2, 1 - float64(len(kept))/float64(t.n)
}

func meanAndSD(v []float64) (mean, sd float64) {
	for _, x := range v {
		mean += x
	}
	mean /= float64(len(v))
	for _, x := range v {
		sd += (x - mean) * (x - mean)
	}
	return mean, math.Sqrt(sd / float64(max(len(v)-1, 1)))
}

func median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	s := slices.Sorted(slices.Values(v))
	return (s[(len(s)-1)/2] + s[len(s)/2]) / 2
}

func variances(tiles []tile) []float64 {
	out := make([]float64, len(tiles))
	for i, t := range tiles {
		out[i] = t.variance
	}
	return out
}
