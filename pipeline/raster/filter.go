package raster

import (
	"fmt"
	"math"
)

// MatchedGain is the noise gain of the 5 × 5 binomial filter: the sigma of its output
// for white noise of sigma 1, √Σw² = (1² + 4² + 6² + 4² + 1²)/16² = 70/256.
const MatchedGain = 70. / 256

var binomial = [5]float32{1. / 16, 4. / 16, 6. / 16, 4. / 16, 1. / 16}

// MatchedFilter writes src under the separable 5 × 5 binomial filter (1 4 6 4 1)/16 to
// dst: the matched filter of a spot with a sigma of 1 px in white noise. Only
// pixels in mask count; beyond the frame there are none. Where some of the 5 × 5
// are missing the sum is scaled so that its noise gain is MatchedGain there too:
//
//	dst = Σ w·src · MatchedGain / √Σ w²   (sums over the pixels in mask)
//
// Outside mask dst is 0. The sizes must agree; dst must not be src.
func MatchedFilter(dst, src *Plane, mask *Mask) {
	if !dst.SameSize(src) || dst == src {
		panic(fmt.Sprintf("raster: filter of %d × %d into %d × %d", src.Width, src.Height, dst.Width, dst.Height))
	}
	checkMask(src, mask)
	tmp := NewPlane(src.Width, src.Height)
	masked := make([]float32, src.Width+4)
	for y := range src.Height {
		filterRow(tmp.Row(y), masked, src.Row(y), mask.Row(y))
	}
	whole := NewMask(mask.Width, mask.Height)
	Erode(whole, mask, 2)
	for y := range src.Height {
		filterColumn(dst.Row(y), tmp, y)
		rescaleRow(dst.Row(y), mask, whole, y)
	}
}

func filterRow(dst, masked, src []float32, in []bool) {
	for x, v := range src {
		masked[x+2] = 0
		if in[x] {
			masked[x+2] = v
		}
	}
	for x := range dst {
		m := masked[x : x+5 : x+5]
		dst[x] = binomial[0]*(m[0]+m[4]) + binomial[1]*(m[1]+m[3]) + binomial[2]*m[2]
	}
}

func filterColumn(dst []float32, tmp *Plane, y int) {
	clear(dst)
	for k, w := range binomial {
		if r := y + k - 2; r >= 0 && r < tmp.Height {
			for x, v := range tmp.Row(r) {
				dst[x] += w * v
			}
		}
	}
}

// rescaleRow puts right the pixels whose 5 × 5 are not all in the mask.
func rescaleRow(dst []float32, mask, whole *Mask, y int) {
	in, all := mask.Row(y), whole.Row(y)
	for x := range dst {
		switch {
		case !in[x]:
			dst[x] = 0
		case !all[x]:
			dst[x] *= float32(MatchedGain / math.Sqrt(weightSquares(mask, x, y)))
		}
	}
}

func weightSquares(mask *Mask, x, y int) float64 {
	sum := 0.
	for dy := -2; dy <= 2; dy++ {
		for dx := -2; dx <= 2; dx++ {
			if mask.At(x+dx, y+dy) {
				w := float64(binomial[dx+2] * binomial[dy+2])
				sum += w * w
			}
		}
	}
	return sum
}

// Erode writes the pixels of src whose square neighbourhood of ±radius px is all in
// src. Beyond the frame there is nothing. dst must not be src.
func Erode(dst, src *Mask, radius int) {
	if dst.Width != src.Width || dst.Height != src.Height || radius < 0 {
		panic("raster: erosion into a mask of another size or by a negative radius")
	}
	good := make([]int, src.Width) // rows from here upwards in which the run condition holds
	run := make([]bool, src.Width)
	for y := range src.Height {
		erodeRow(run, src.Row(y), radius)
		for x, in := range run {
			good[x]++
			if !in {
				good[x] = 0
			}
			if y >= radius {
				dst.Bits[(y-radius)*dst.Width+x] = good[x] > 2*radius
			}
		}
	}
	for y := max(src.Height-radius, 0); y < src.Height; y++ {
		clear(dst.Row(y))
	}
}

func erodeRow(dst, src []bool, radius int) {
	clear(dst)
	n := 0
	for x, in := range src {
		n++
		if !in {
			n = 0
		}
		if n > 2*radius {
			dst[x-radius] = true
		}
	}
}

// SNR writes filtered / (MatchedGain·noise): the matched filter's output in units of
// its own sigma. It is 0 where noise is not above 0.
func SNR(dst, filtered, noise *Plane) {
	if !dst.SameSize(filtered) || !dst.SameSize(noise) {
		panic("raster: planes of unlike size")
	}
	for y := range dst.Height {
		out, n := dst.Row(y), noise.Row(y)
		for x, v := range filtered.Row(y) {
			out[x] = 0
			if n[x] > 0 {
				out[x] = v / (MatchedGain * n[x])
			}
		}
	}
}

// Subtract writes a − b. The sizes must agree; dst may be a or b.
func Subtract(dst, a, b *Plane) {
	if !dst.SameSize(a) || !dst.SameSize(b) {
		panic("raster: planes of unlike size")
	}
	for y := range dst.Height {
		out, q := dst.Row(y), b.Row(y)
		for x, v := range a.Row(y) {
			out[x] = v - q[x]
		}
	}
}

// Ratio writes a / noise for the pixels in mask whose noise is above 0, and 0 for the
// others. The sizes must agree; dst may be a.
func Ratio(dst, a, noise *Plane, mask *Mask) {
	if !dst.SameSize(a) || !dst.SameSize(noise) {
		panic("raster: planes of unlike size")
	}
	checkMask(dst, mask)
	for y := range dst.Height {
		out, n, in := dst.Row(y), noise.Row(y), mask.Row(y)
		for x, v := range a.Row(y) {
			out[x] = 0
			if in[x] && n[x] > 0 {
				out[x] = v / n[x]
			}
		}
	}
}
