package render

import (
	"math"
	"math/rand/v2"
)

func (l Lay) drawn() bool { return l.Pattern == LayConcentric || l.Pattern == LayStraight }

// layTones is how many tones near the period a lay is made of; they beat, so its
// amplitude wanders.
const layTones = 16

// layProfile returns the lay across its lines, every step px from −reach px on: tones
// of a normal spread of 15 % about 1/period, each dimmed by the blur's transfer
// function exp(−2π²σ²f²). Before blur its root mean square is rms.
func layProfile(r *rand.Rand, rms, periodPx, blurPx, reach, step float64) []float32 {
	out := make([]float32, int(2*reach/step)+2)
	for range layTones {
		f := math.Abs(1+0.15*r.NormFloat64()) / periodPx
		phase := 2 * math.Pi * r.Float64()
		amplitude := rms * math.Sqrt(2.0/layTones) * math.Exp(-2*math.Pi*math.Pi*blurPx*blurPx*f*f)
		// a rotating vector instead of a sine per step
		turnS, turnC := math.Sincos(2 * math.Pi * f * step)
		s, c := math.Sincos(phase)
		for i := range out {
			out[i] += float32(amplitude * s)
			s, c = s*turnC+c*turnS, c*turnC-s*turnS
		}
	}
	return out
}

// texture is slow random relief with standard deviation 1: cubic B-splines on a square
// grid of random heights.
type texture struct {
	heights []float32
	columns int
	weights [][4]float32 // of the four columns, by x
	first   []int        // the first of them
	scale   float64
}

// splineSpread is the root mean square, over a cell, of what a grid of independent
// heights of spread 1 becomes: (151/315) for both axes together.
const splineSpread = 151.0 / 315

func newTexture(r *rand.Rand, width, height int, scale float64) *texture {
	t := &texture{scale: scale, columns: int(float64(width)/scale) + 5, weights: make([][4]float32, width), first: make([]int, width)}
	t.heights = make([]float32, t.columns*(int(float64(height)/scale)+5))
	for i := range t.heights {
		t.heights[i] = float32(r.NormFloat64() / splineSpread)
	}
	for x := range width {
		t.first[x], t.weights[x] = spline(float64(x) / scale)
	}
	return t
}

// spline returns the first of the four heights about t and their weights.
func spline(t float64) (int, [4]float32) {
	i := math.Floor(t)
	f := t - i
	g := 1 - f
	return int(i), [4]float32{float32(g * g * g / 6), float32((3*f*f*f - 6*f*f + 4) / 6),
		float32((3*g*g*g - 6*g*g + 4) / 6), float32(f * f * f / 6)}
}

// row writes 1 + spread·relief for every x of row y.
func (t *texture) row(dst []float32, y int, spread float64) {
	if spread == 0 {
		for x := range dst {
			dst[x] = 1
		}
		return
	}
	first, w := spline(float64(y) / t.scale)
	mixed := make([]float32, t.columns)
	for k := range w {
		for c := range mixed {
			mixed[c] += float32(spread) * w[k] * t.heights[(first+k)*t.columns+c]
		}
	}
	for x := range dst {
		m, w := mixed[t.first[x]:t.first[x]+4], &t.weights[x]
		dst[x] = 1 + w[0]*m[0] + w[1]*m[1] + w[2]*m[2] + w[3]*m[3]
	}
}
