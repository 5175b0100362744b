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
	ridge  bool // what lies on both sides is as strong
}

func (c course) length() float64 {
	sum := 0.
	for i := 1; i < len(c.points); i++ {
		sum += distance(c.points[i-1], c.points[i])
	}
	return sum
}

// sigmas takes the pieces together, each against what lines of the whole length scatter at
// its place.
func (c course) sigmas() float64 {
	sum, variance, positions := 0., 0., 0.
	for _, p := range c.pieces {
		positions += p.positions()
	}
	for _, p := range c.pieces {
		sum += float64(c.sign) * p.sum
		variance += p.weight * max(p.scatter.over(positions), p.scatter.over(p.positions()))
	}
	if variance <= 0 {
		return 0
	}
	return sum / math.Sqrt(rounding*variance)
}

// even reports whether the evidence is spread over the whole course.
func (c course) even() bool {
	var all []float64
	positions, variance, weight := 0., 0., 0.
	for _, p := range c.pieces {
		all = append(all, p.blocks...)
		positions += p.positions()
	}
	for _, p := range c.pieces {
		variance, weight = variance+p.weight*p.scatter.over(positions), weight+p.weight
	}
	return even(all, variance/max(weight, 1))
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

// A stride is a step by which a line is followed: its far end may lie up to swing px beside
// where the line's bend would lead, and it must stand out by some sigmas.
type stride struct{ px, swing, sigmas float64 }

// The first stride is the usual one, and after a gap it must stand out more; the others
// find what is left where the line ends.
var (
	strides = [...]stride{{32, 6, 3.8}, {16, 3, 3.4}, {8, 1.5, 3}}
	fresh   = stride{32, 6, 4.4}
)

const swingStep = 0.5

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
	bends        bool // it was followed beyond the straight piece
}

func (f *finder) followEnd(c *course) {
	n := len(c.points)
	from, to := c.points[n-2], c.points[n-1]
	w := walk{at: to, angle: math.Atan2(to.Y-from.Y, to.X-from.X)}
	most, last := (f.work.width+f.work.height)/8, -1 // the piece of the last step
	for range most {
		p, far, ok := f.next(w, c.sign)
		if !ok {
			w = w.ahead()
			if w.gap > f.s.JoinGap {
				break
			}
			continue
		}
		if last >= 0 { // so that it does not come back onto itself
			f.erase(c.pieces[last].stretch, 0)
		}
		if w.gap > 0 {
			c.points = append(c.points, w.at)
		}
		length := distance(w.at, far)
		turned := math.Remainder(math.Atan2(far.Y-w.at.Y, far.X-w.at.X)-w.angle, 2*math.Pi)
		c.points, c.pieces = append(c.points, far), append(c.pieces, p)
		if length > strides[0].px/2 {
			w.curve = 0.5*w.curve + 0.5*turned/length
			w.angle += turned
		}
		w.at, w.gap, w.bends = far, 0, true
		last = len(c.pieces) - 1
	}
	if last >= 0 {
		f.settleEnd(c, w.curve)
	}
}

// ahead goes on without evidence.
func (w walk) ahead() walk {
	px := strides[0].px
	w.angle += w.curve * px
	sin, cos := math.Sincos(w.angle)
	w.at = raster.Point{X: w.at.X + px*cos, Y: w.at.Y + px*sin}
	w.gap += px
	return w
}

// next finds the best next step of the longest stride that counts.
func (f *finder) next(w walk, sign int) (p piece, far raster.Point, ok bool) {
	if w.gap > 0 {
		return f.step(w, fresh, sign)
	}
	for _, s := range strides {
		if s != strides[0] && !w.bends {
			break // the end of a straight piece is known
		}
		if p, far, ok = f.step(w, s, sign); ok {
			return p, far, true
		}
	}
	return p, far, false
}

// step finds the best next step; ok is false where none counts.
func (f *finder) step(w walk, s stride, sign int) (piece, raster.Point, bool) {
	sin, cos := math.Sincos(w.angle + w.curve*s.px)
	var best piece
	var end raster.Point
	most := 0.
	for d := -s.swing; d <= s.swing; d += swingStep {
		far := raster.Point{X: w.at.X + s.px*cos - d*sin, Y: w.at.Y + s.px*sin + d*cos}
		k, ok := between(w.at, far)
		if !ok {
			continue
		}
		if t := f.sum(k); t.sigmas(sign) > most {
			most, end = t.sigmas(sign), far
			best = piece{k, t, sign, scatter{}, nil}
		}
	}
	if most < s.sigmas {
		return best, end, false
	}
	best.scatter = f.scatter(best.stretch)
	if best.sigmas() < s.sigmas || !f.fills(best) {
		return best, end, false
	}
	best, end, ok := f.cutEnd(best, w.at, end)
	best.blocks = f.blocks(best)
	return best, end, ok
}

// fills reports whether both halves of a step have their part in it: one spot has not.
func (f *finder) fills(p piece) bool {
	middle := (p.a + p.b) / 2
	first, second := f.sum(p.resized(p.a, middle)), f.sum(p.resized(middle+1, p.b))
	return min(first.sigmas(p.sign), second.sigmas(p.sign)) > 0.35*p.total.sigmas(p.sign)
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
