package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

// beyond is how far past its last step the end of a followed line is looked for, px, where
// it may lie up to beyondSwing px beside the bend.
const beyond, beyondSwing = 40, 4

// leastGain is by how much a longer line must be likelier, as the natural logarithm of the
// ratio: some of the ways to go on look better by chance.
const leastGain = 2

// settleEnd moves the end of a followed line, whose last piece is the last step, to where
// the line most likely ends.
func (f *finder) settleEnd(c *course, curve float64) {
	n, last := len(c.points), len(c.pieces)-1
	from, to, step := c.points[n-2], c.points[n-1], c.pieces[last].stretch
	if w, part := f.likeliest(c, from, to, beyondSwing, 0); part >= 4 {
		to = w.to
		f.replaceEnd(c, w, part)
	}
	if c.points[n-1] == to { // all of the step: does it go on?
		angle := math.Atan2(to.Y-from.Y, to.X-from.X) + curve*(distance(from, to)+beyond)/2
		far := raster.Point{X: to.X + beyond*math.Cos(angle), Y: to.Y + beyond*math.Sin(angle)}
		if w, part := f.likeliest(c, to, far, beyondSwing, leastGain); part > 0 {
			c.points, c.pieces = append(c.points, far), append(c.pieces, piece{})
			f.replaceEnd(c, w, part)
		}
	}
	f.erase(step, 0)
}

// way is a straight way that the end of a line may go.
type way struct {
	stretch
	from, to raster.Point
}

// likeliest finds which of the ways from a point to one, or up to swing px beside it, the
// line most likely goes, and how many positions of it; 0 where none is likely enough.
func (f *finder) likeliest(c *course, from, to raster.Point, swing, least float64) (best way, part int) {
	d, height := distance(from, to), c.height()
	for off := -swing; off <= swing; off += swingStep {
		far := raster.Point{X: to.X - off*(to.Y-from.Y)/d, Y: to.Y + off*(to.X-from.X)/d}
		k, ok := between(from, far)
		if !ok {
			continue
		}
		f.takeOut(k, c.sign, height)
		if n, gain := mostLikely(f.outwards(k, from), min(height, mostHeight), c.sign); gain > least {
			best, part, least = way{k, from, far}, n, gain
		}
	}
	return best, part
}

// replaceEnd makes the first positions of a way the last piece of a course.
func (f *finder) replaceEnd(c *course, w way, positions int) {
	end := w.to
	if all := w.b - w.a + 1; positions < all {
		end = partway(w.from, w.to, float64(positions)/float64(all))
	}
	if k, ok := between(w.from, end); ok {
		c.points[len(c.points)-1], c.pieces[len(c.pieces)-1] = end, f.pieceOf(k, c.sign)
	}
}

func (f *finder) pieceOf(k stretch, sign int) piece {
	p := piece{k, f.sum(k), sign, f.scatter(k), nil}
	p.blocks = f.blocks(p)
	return p
}

// partway is the point at a share of the way from p to q.
func partway(p, q raster.Point, share float64) raster.Point {
	return raster.Point{X: p.X + share*(q.X-p.X), Y: p.Y + share*(q.Y-p.Y)}
}

// outwards returns the profile of a stretch from the end that is nearer to a point.
func (f *finder) outwards(k stretch, from raster.Point) []total {
	v := f.profile(k)
	if distance(k.point(float64(k.a), k.ca), from) > distance(k.point(float64(k.b), k.cb), from) {
		slices.Reverse(v)
	}
	return v
}

// mostLikely returns how many positions of a profile a line most likely takes that has a
// height of mean for each weight and then ends, and the logarithm of how much likelier that
// is than none: over unit noise the highest sum of mean·value − mean²·weight/2.
func mostLikely(v []total, mean float64, sign int) (positions int, gain float64) {
	sum := 0.
	for i, t := range v {
		sum += mean*float64(sign)*t.sum - mean*mean*t.weight/2
		if sum > gain {
			positions, gain = i+1, sum
		}
	}
	return positions, gain
}

// mostHeight is the height in sigmas of a pixel from which an end is sharp anyhow, and what
// is left there of an uneven line still counts.
const mostHeight = 1.2

// height is that of the line, sigmas of a pixel.
func (c course) height() float64 {
	sum, weight := 0., 0.
	for _, p := range c.pieces {
		sum, weight = sum+float64(c.sign)*p.sum, weight+p.weight
	}
	return sum / max(weight, 1)
}
