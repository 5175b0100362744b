package lines

// #include "lines.h"
import "C"

import "math"

// piece is a straight line that was refined.
type piece struct {
	stretch
	total
	sign    int
	scatter scatter // of lines at its place and slope
	blocks  []float64
}

// positions is the number of pixels along its longer side.
func (k stretch) positions() float64 { return float64(k.b-k.a+1) * max(1, math.Abs(k.slope())) }

// sigmas is the piece's sum over its spread at its place, slope and length.
func (p piece) sigmas() float64 {
	return p.total.sigmas(p.sign) / math.Sqrt(p.scatter.over(p.positions()))
}

const (
	leastPositions = C.LN_PART // of a refined line
	firstReach     = 96        // positions looked at beyond each end
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
	p := f.polish(k, sign, 2, 0.5)
	if p.sigmas() < f.s.Threshold-promising {
		return p
	}
	for range mostRounds {
		longer, ok := f.lengthen(p)
		if !ok {
			break
		}
		p = longer
	}
	return p
}

// promising is how many sigmas below the threshold a line is worth a longer look.
const promising = 0.6

// lengthen looks for the line beyond a stretch where noise hides it, further across than
// its angle was known before.
func (f *finder) lengthen(p piece) (piece, bool) {
	best := p
	for _, by := range [][2]int{{firstReach, 0}, {0, firstReach}} {
		a, b := f.inside(p.stretch, p.a-by[0], p.b+by[1])
		if a == p.a && b == p.b || b-a < leastPositions {
			continue
		}
		if q := f.polish(p.resized(a, b), p.sign, 4, 0.75); q.sigmas() > best.sigmas()+0.1 {
			best = q
		}
	}
	return best, best.stretch != p.stretch
}

// polish moves both ends across, at first by up to reach steps of the given size, and along,
// in turns and in ever smaller steps.
func (f *finder) polish(k stretch, sign, reach int, step float64) piece {
	k, t := f.settle(k, reach, step, sign)
	p := piece{k, t, sign, f.scatter(k), nil}
	step = 0.5
	for i := range mostRounds {
		before, was := p.sigmas(), p.stretch
		k, t := f.settle(f.extend(p).upright(), 2, step, sign)
		p = piece{k, t, sign, f.scatter(k), nil}
		if p.sigmas() < before+0.02 && step <= 0.125 || p.sigmas() < f.hopeless(i) {
			break
		}
		if near(was, p.stretch) || p.sigmas() < before+0.1 {
			step = max(step/2, 0.125)
		}
	}
	return p
}

// below is how many sigmas a line that comes to something lies below the threshold after
// each round at most: of scratches of 300 px at half a sigma one in fifty does.
var below = [...]float64{1.5, 1.1, 0.8}

func (f *finder) hopeless(round int) float64 {
	return f.s.Threshold - below[min(round, len(below)-1)]
}

func near(p, q stretch) bool {
	return p.axis == q.axis && max(p.a-q.a, q.a-p.a, p.b-q.b, q.b-p.b) < 4
}

// extend returns the part of the line through a piece, longer or shorter than it, that
// stands out most.
func (f *finder) extend(p piece) stretch {
	reach := max(firstReach, (p.b-p.a)/2)
	a, b := f.inside(p.stretch, p.a-reach, p.b+reach)
	if b-a < leastPositions {
		return p.stretch
	}
	long := p.resized(a, b)
	if first, last, ok := f.part(long, p.sign, p.scatter); ok {
		return long.resized(a+first, a+last)
	}
	return p.stretch
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
