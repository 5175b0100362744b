package deflectometry

import (
	"math"
	"runtime"
	"sync"
)

// sequence is frames of one size, unpacked row by row: of many large ones only a row each
// is in memory as numbers.
type sequence struct {
	width, height int
	rows          []func(dst []float32, y int)
}

func (q sequence) part(from, to int) sequence {
	return sequence{q.width, q.height, q.rows[from:to]}
}

// fringes is what N frames of one period and direction say of each pixel.
type fringes struct {
	phase      []float64 // rad, −π to π
	modulation []float32 // counts, B of the model
}

// solve is the least-squares phase of I_k = A + B·cos(φ + 2πk/N), N ≥ 3 evenly spaced
// steps: φ = atan2(−Σ I_k sin(2πk/N), Σ I_k cos(2πk/N)), B = (2/N)·√(both sums squared).
func solve(q sequence, linear func(float32) float64) fringes {
	n := len(q.rows)
	sin, cos := make([]float64, n), make([]float64, n)
	for k := range n {
		sin[k], cos[k] = math.Sincos(2 * math.Pi * float64(k) / float64(n))
	}
	out := fringes{make([]float64, q.width*q.height), make([]float32, q.width*q.height)}
	inBands(q.height, func(y0, y1 int) {
		row, s, c := make([]float32, q.width), make([]float64, q.width), make([]float64, q.width)
		for y := y0; y < y1; y++ {
			clear(s)
			clear(c)
			for k, unpack := range q.rows {
				unpack(row, y)
				for x, v := range row {
					value := linear(v)
					s[x], c[x] = s[x]+value*sin[k], c[x]+value*cos[k]
				}
			}
			for x := range row {
				i := y*q.width + x
				out.phase[i], out.modulation[i] = math.Atan2(-s[x], c[x]), float32(2/float64(n)*math.Hypot(s[x], c[x]))
			}
		}
	})
	return out
}

// inBands calls do for bands of rows, as many at once as there are processors. What a row
// gets must not depend on the band it is in.
func inBands(height int, do func(y0, y1 int)) {
	n := min(runtime.GOMAXPROCS(0), max(height, 1))
	var wg sync.WaitGroup
	for b := range n {
		wg.Go(func() { do(b*height/n, (b+1)*height/n) })
	}
	wg.Wait()
}

// linearised undoes a display that shows level^gamma: harmonics of that would leak into
// the phase of 3 and 4 steps. top is the count of the brightest level.
func linearised(gamma float64, top int) func(float32) float64 {
	if gamma == 1 {
		return func(v float32) float64 { return float64(v) }
	}
	table := make([]float64, top+1)
	for i := range table {
		table[i] = float64(top) * math.Pow(float64(i)/float64(top), 1/gamma)
	}
	return func(v float32) float64 { return table[min(max(int(v), 0), top)] }
}

// refine finds the fringe order of a finer period from the coarser phase, which is known
// without ambiguity. It makes fine the phase over all fringes, and takes out of use where
// the order was so far from a whole number that it could be the next one.
func refine(coarse, fine []float64, ratio float64, use []bool) {
	for i := range fine {
		order := (coarse[i]*ratio - fine[i]) / (2 * math.Pi)
		whole := math.Round(order)
		fine[i] += 2 * math.Pi * whole
		use[i] = use[i] && math.Abs(order-whole) <= doubtful
	}
}

// flatten takes the best polynomial of second order in x and y off a picture, over the
// pixels in use: what the part's own form and the layout of screen and camera give.
func flatten(values []float64, use []bool, width int) {
	const terms = 6
	var a [terms][terms + 1]float64
	height := len(values) / width
	basis := func(x, y int) [terms]float64 {
		u, v := 2*float64(x)/float64(width)-1, 2*float64(y)/float64(height)-1
		return [terms]float64{1, u, v, u * u, u * v, v * v}
	}
	step := max(int(math.Sqrt(float64(len(values))/enoughForForm)), 1)
	for y := step / 2; y < height; y += step {
		for x := step / 2; x < width; x += step {
			if i := y*width + x; use[i] {
				b := basis(x, y)
				for r := range terms {
					for c := range terms {
						a[r][c] += b[r] * b[c]
					}
					a[r][terms] += b[r] * values[i]
				}
			}
		}
	}
	coefficients := eliminate(a[:])
	inBands(height, func(y0, y1 int) {
		for y := y0; y < y1; y++ {
			for x := range width {
				for r, b := range basis(x, y) {
					values[y*width+x] -= coefficients[r] * b
				}
			}
		}
	})
}

// enoughForForm is about how many pixels, evenly spread, say what the form is.
const enoughForForm = 1e6

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
