package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// course is a line that may bend and may have gaps.
type course struct {
	points []raster.Point // of the picture searched
	pieces []piece        // what its evidence is
	sign   int
}

func (c course) length() float64 {
	sum := 0.
	for i := 1; i < len(c.points); i++ {
		sum += distance(c.points[i-1], c.points[i])
	}
	return sum
}

// sigmas takes the pieces together, each against its own spread.
func (c course) sigmas() float64 {
	sum, variance := 0., 0.
	for _, p := range c.pieces {
		sum += float64(c.sign) * p.sum
		variance += p.weight * p.variance
	}
	if variance <= 0 {
		return 0
	}
	return sum / math.Sqrt(rounding*variance)
}

func (c course) white() float64 {
	var t total
	for _, p := range c.pieces {
		t = t.plus(p.total)
	}
	return t.sigmas(c.sign)
}

func (c course) reversed() course {
	c.points = slices.Clone(c.points)
	slices.Reverse(c.points)
	return c
}

func distance(p, q raster.Point) float64 { return math.Hypot(p.X-q.X, p.Y-q.Y) }

// A line is followed in steps of stepPx, whose far end may lie up to swingPx beside where
// the line's bend would lead. A step counts with stepSigmas, after a gap with freshSigmas.
const (
	stepPx      = 32
	swingPx     = 6
	swingStep   = 0.5
	stepSigmas  = 3
	freshSigmas = 4.2
)

// follow goes on from both ends of a straight piece.
func (f *finder) follow(p piece) course {
	a, b := p.ends()
	c := course{points: []raster.Point{a, b}, pieces: []piece{p}, sign: p.sign}
	f.followEnd(&c)
	c = c.reversed()
	f.followEnd(&c)
	return c
}

// walk is the end of a line on its way.
type walk struct {
	at           raster.Point
	angle, curve float64 // rad, rad/px
	gap          float64
}

func (f *finder) followEnd(c *course) {
	n := len(c.points)
	from, to := c.points[n-2], c.points[n-1]
	w := walk{at: to, angle: math.Atan2(to.Y-from.Y, to.X-from.X)}
	most := (f.work.width + f.work.height) / stepPx * 4
	for range most {
		p, far, ok := f.step(w, c.sign)
		if !ok {
			w.gap += stepPx
			if w.gap > f.s.JoinGap {
				return
			}
			w = w.ahead()
			continue
		}
		if w.gap > 0 {
			c.points = append(c.points, w.at)
		}
		turned := math.Remainder(math.Atan2(far.Y-w.at.Y, far.X-w.at.X)-w.angle, 2*math.Pi)
		c.points, c.pieces = append(c.points, far), append(c.pieces, p)
		w.curve = 0.5*w.curve + 0.5*turned/stepPx
		w.angle += turned
		w.at, w.gap = far, 0
		f.erase(p.stretch, 0) // so that it does not come back onto itself
	}
}

// ahead goes on without evidence.
func (w walk) ahead() walk {
	w.angle += w.curve * stepPx
	sin, cos := math.Sincos(w.angle)
	w.at = raster.Point{X: w.at.X + stepPx*cos, Y: w.at.Y + stepPx*sin}
	return w
}

// step finds the best next step; ok is false where none counts.
func (f *finder) step(w walk, sign int) (piece, raster.Point, bool) {
	sin, cos := math.Sincos(w.angle + w.curve*stepPx)
	var best piece
	var end raster.Point
	most := 0.
	for d := -float64(swingPx); d <= swingPx; d += swingStep {
		far := raster.Point{X: w.at.X + stepPx*cos - d*sin, Y: w.at.Y + stepPx*sin + d*cos}
		k, ok := between(w.at, far)
		if !ok {
			continue
		}
		if t := f.sum(k); t.sigmas(sign) > most {
			most, end = t.sigmas(sign), far
			best = piece{k, t, sign, 1}
		}
	}
	if most == 0 {
		return best, end, false
	}
	best.variance = f.spread.over(best.stretch)
	need := float64(stepSigmas)
	if w.gap > 0 {
		need = freshSigmas
	}
	if best.sigmas() < need || !f.fills(best) {
		return best, end, false
	}
	return f.cutEnd(best, w.at, end)
}

// fills reports whether both halves of a step have their part in it: one spot has not.
func (f *finder) fills(p piece) bool {
	middle := (p.a + p.b) / 2
	first, second := f.sum(p.resized(p.a, middle)), f.sum(p.resized(middle+1, p.b))
	return min(first.sigmas(p.sign), second.sigmas(p.sign)) > 0.2*p.total.sigmas(p.sign)
}

// cutEnd keeps of a step what belongs to the line, should it end within.
func (f *finder) cutEnd(p piece, from, far raster.Point) (piece, raster.Point, bool) {
	v := f.profile(p.stretch)
	backwards := distance(p.point(float64(p.a), p.ca), from) > distance(p.point(float64(p.b), p.cb), from)
	if backwards {
		slices.Reverse(v)
	}
	var t total
	best, n := 0., 0
	for i, one := range v {
		t = t.plus(one)
		if x := t.sigmas(p.sign); x >= best {
			best, n = x, i+1
		}
	}
	if n < len(v)-2 { // the line ends here
		share := float64(n) / float64(len(v))
		far = raster.Point{X: from.X + share*(far.X-from.X), Y: from.Y + share*(far.Y-from.Y)}
		k, ok := between(from, far)
		if !ok || n < 4 {
			return p, far, false
		}
		p.stretch, p.total = k, f.sum(k)
	}
	return p, far, true
}

// erase makes a stretch not count, reach px across.
func (f *finder) erase(k stretch, reach int) { f.work.eraseAlong(k, reach) }

// mostReach is how far across a line is erased at most.
const mostReach = 16

// eraseCourse makes the line not count, as wide as it stands out.
func (f *finder) eraseCourse(c course) {
	for _, p := range c.pieces {
		reach := 2
		for _, side := range []float64{-1, 1} {
			for d := 2; d <= mostReach; d++ {
				k := p.stretch
				k.ca, k.cb = k.ca+side*float64(d), k.cb+side*float64(d)
				if f.sum(k).sigmas(c.sign) < 2.5 {
					break
				}
				reach = max(reach, d+1)
			}
		}
		f.erase(p.resized(p.a-2, p.b+2), reach)
	}
	for i := 1; i < len(c.points); i++ { // gaps, too
		if k, ok := between(c.points[i-1], c.points[i]); ok {
			f.erase(k, 2)
		}
	}
}
