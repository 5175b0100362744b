package deflectometry

import (
	"math"

	"lapgate/pipeline/raster"
)

// fringes is what N frames of one period and direction say of each pixel.
type fringes struct {
	phase      []float64 // rad, −π to π
	modulation []float64 // counts, B of the model
}

// solve is the least-squares phase of I_k = A + B·cos(φ + 2πk/N), N ≥ 3 evenly spaced
// steps: φ = atan2(−Σ I_k sin(2πk/N), Σ I_k cos(2πk/N)), B = (2/N)·√(both sums squared).
func solve(frames []*raster.Plane, linear func(float32) float64) fringes {
	n := len(frames)
	sin, cos := make([]float64, n), make([]float64, n)
	for k := range n {
		sin[k], cos[k] = math.Sincos(2 * math.Pi * float64(k) / float64(n))
	}
	p := frames[0]
	out := fringes{make([]float64, p.Width*p.Height), make([]float64, p.Width*p.Height)}
	for y := range p.Height {
		for x := range p.Width {
			s, c := 0.0, 0.0
			for k, f := range frames {
				v := linear(f.At(x, y))
				s, c = s+v*sin[k], c+v*cos[k]
			}
			i := y*p.Width + x
			out.phase[i], out.modulation[i] = math.Atan2(-s, c), 2/float64(n)*math.Hypot(s, c)
		}
	}
	return out
}

// linearised undoes a display that shows level^gamma: harmonics of that would leak into
// the phase of 3 and 4 steps. top is the count of the brightest level.
func linearised(gamma, top float64) func(float32) float64 {
	if gamma == 1 {
		return func(v float32) float64 { return float64(v) }
	}
	return func(v float32) float64 { return top * math.Pow(max(float64(v), 0)/top, 1/gamma) }
}

// refine finds the fringe order of a finer period from the coarser phase, which is known
// without ambiguity. It returns the fine phase over all fringes, and how far each order
// was from a whole number: near 0.5 it could be the next one.
func refine(coarse, fine []float64, ratio float64) (phase, doubt []float64) {
	phase, doubt = make([]float64, len(fine)), make([]float64, len(fine))
	for i := range fine {
		order := (coarse[i]*ratio - fine[i]) / (2 * math.Pi)
		whole := math.Round(order)
		phase[i], doubt[i] = fine[i]+2*math.Pi*whole, math.Abs(order-whole)
	}
	return phase, doubt
}

// flatten takes the best polynomial of second order in x and y off a picture, over the
// pixels in use: what the part's own form and the layout of screen and camera give.
func flatten(values []float64, use []bool, width int) {
	const terms = 6
	var a [terms][terms + 1]float64
	height := len(values) / width
	basis := func(i int) [terms]float64 {
		x, y := 2*float64(i%width)/float64(width)-1, 2*float64(i/width)/float64(height)-1
		return [terms]float64{1, x, y, x * x, x * y, y * y}
	}
	for i, v := range values {
		if !use[i] {
			continue
		}
		b := basis(i)
		for r := range terms {
			for c := range terms {
				a[r][c] += b[r] * b[c]
			}
			a[r][terms] += b[r] * v
		}
	}
	coefficients := eliminate(a[:])
	for i := range values {
		for r, b := range basis(i) {
			values[i] -= coefficients[r] * b
		}
	}
}

// eliminate solves normal equations by Gauss and Jordan with row pivots; a term that the
// pixels do not determine is 0.
func eliminate(a [][7]float64) []float64 {
	const none = -1
	rowOf, taken := make([]int, len(a)), make([]bool, len(a))
	for c := range a {
		best := none
		for r := range a {
			if !taken[r] && (best == none || math.Abs(a[r][c]) > math.Abs(a[best][c])) {
				best = r
			}
		}
		rowOf[c] = none
		if best == none || math.Abs(a[best][c]) < 1e-9 {
			continue
		}
		rowOf[c], taken[best] = best, true
		for r := range a {
			if r == best {
				continue
			}
			f := a[r][c] / a[best][c]
			for k := range a[r] {
				a[r][k] -= f * a[best][k]
			}
		}
	}
	out := make([]float64, len(a))
	for c, r := range rowOf {
		if r != none {
			out[c] = a[r][len(a)] / a[r][c]
		}
	}
	return out
}
