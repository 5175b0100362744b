package lines

// #include "lines.h"
import "C"

import "math"

// piece is a straight line that was refined.
type piece struct {
	stretch
	total
	sign     int
	variance float64 // of its sum over that of white noise
}

// sigmas is the piece's sum over its spread at its place, slope and length.
func (p piece) sigmas() float64 { return p.total.sigmas(p.sign) / math.Sqrt(p.variance) }

const (
	leastPositions = 16 // of a refined line
	firstReach     = 96 // positions looked at beyond each end
	mostRounds     = 12
)

// strip returns the stretch that a hit stands for.
func (f *finder) strip(h C.ln_hit) stretch {
	k := stretch{axis: int(h.axis), a: int(h.first), b: int(h.first) + rows - 1, ca: float64(h.x), cb: float64(h.x) + float64(h.t)}
	if h.flipped != 0 {
		k.ca, k.cb = k.cb, k.ca
	}
	if last := f.along(k.axis) - 1; k.b > last {
		k = k.resized(k.a, last)
	}
	return k
}

// along is how long the picture is along an axis.
func (f *finder) along(axis int) int {
	if axis == 0 {
		return f.work.height
	}
	return f.work.width
}

// refine moves both ends of a line along and across to where its sum stands out most.
func (f *finder) refine(k stretch, sign int) piece {
	k, t := f.settle(k, 2, 0.75, sign)
	p := piece{k, t, sign, f.spread.over(k)}
	step := 0.5
	for range mostRounds {
		before, was := p.sigmas(), p.stretch
		excess, level := f.excess(p)
		grown := f.extend(p.stretch, sign, excess, level)
		k, t := f.settle(grown, 2, step, sign)
		p = piece{k, t, sign, f.spread.over(k)}
		if p.sigmas() < before+0.02 && step <= 0.125 || p.sigmas() < 4 {
			break
		}
		if near(was, p.stretch) || p.sigmas() < before+0.1 {
			step = max(step/2, 0.125)
		}
	}
	return p
}

func near(p, q stretch) bool {
	return max(p.a-q.a, q.a-p.a, p.b-q.b, q.b-p.b) < 4
}

// excess returns how the variance grows: level·(1 + excess·positions).
func (f *finder) excess(p piece) (excess, level float64) {
	if p.variance <= 1 {
		return 0, p.variance
	}
	return (p.variance - 1) / float64(p.b-p.a+1), 1
}

// extend returns the part of the line through k, longer or shorter than it, that stands
// out most.
func (f *finder) extend(k stretch, sign int, excess, level float64) stretch {
	reach := max(firstReach, (k.b-k.a)/2)
	a, b := f.inside(k, k.a-reach, k.b+reach)
	if b-a < leastPositions {
		return k
	}
	long := k.resized(a, b)
	v := f.profile(long)
	if len(v) < leastPositions {
		return k
	}
	first, last := bestPart(v, sign, excess, level)
	return long.resized(a+first, a+last)
}

// inside cuts positions a to b to those where the line lies in the picture.
func (f *finder) inside(k stretch, a, b int) (int, int) {
	a, b = max(a, 0), min(b, f.along(k.axis)-1)
	wide := float64(f.along(1 - k.axis))
	slope := k.slope()
	if slope == 0 {
		return a, b
	}
	m0, m1 := float64(k.a)+(-1-k.ca)/slope, float64(k.a)+(wide-k.ca)/slope
	if m1 < m0 {
		m0, m1 = m1, m0
	}
	return max(a, int(math.Ceil(max(m0, -1)))), min(b, int(math.Floor(min(m1, 1e6))))
}

// bestPart returns the first and the last position of the part with the highest sum over
// its spread: first among bounds some positions apart, then all about those.
func bestPart(v []total, sign int, excess, level float64) (first, last int) {
	n := len(v)
	s, w := make([]float64, n+1), make([]float64, n+1)
	for i, t := range v {
		s[i+1], w[i+1] = s[i]+float64(sign)*t.sum, w[i]+t.weight
	}
	value := func(i, j int) float64 {
		if weight := w[j] - w[i]; j-i >= leastPositions && weight > 0 {
			return (s[j] - s[i]) / math.Sqrt(level*weight*(1+excess*float64(j-i)))
		}
		return math.Inf(-1)
	}
	step := max(4, n/64)
	i, j := 0, n
	best := value(0, n)
	for a := 0; a < n; a += step {
		for b := a + leastPositions; b <= n; b += step {
			if x := value(a, b); x > best {
				best, i, j = x, a, b
			}
		}
	}
	for range 2 {
		for a := max(i-step, 0); a <= min(i+step, n); a++ {
			if x := value(a, j); x > best {
				best, i = x, a
			}
		}
		for b := max(j-step, 0); b <= min(j+step, n); b++ {
			if x := value(i, b); x > best {
				best, j = x, b
			}
		}
	}
	return i, j - 1
}
