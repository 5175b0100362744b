package lines

import (
	"math"

	"lapgate/pipeline/raster"
)

// border is the region of a picture of some size.
type border struct {
	raster.Rows
	width, height int
	first         []int32 // of the rows' spans, and their end
}

func newBorder(region raster.Rows, width, height int) border {
	b := border{region, width, height, make([]int32, height+1)}
	for _, s := range region.Spans() {
		b.first[s.Y+1]++
	}
	for y := range height {
		b.first[y+1] += b.first[y]
	}
	return b
}

// has is At, at once for a row of one span.
func (b *border) has(x, y int) bool {
	if uint(y) >= uint(b.height) {
		return false
	}
	if at := b.first[y]; b.first[y+1]-at == 1 {
		s := &b.Spans()[at]
		return x >= s.X0 && x < s.X1
	}
	return b.At(x, y)
}

// holds reports whether all of a rectangle is in rows of one span each; bounds are included.
func (b *border) holds(x0, y0, x1, y1 int) bool {
	if y0 < 0 || y1 >= b.height {
		return false
	}
	spans := b.Spans()
	for y := y0; y <= y1; y++ {
		at := b.first[y]
		if b.first[y+1]-at != 1 || x0 < spans[at].X0 || x1 >= spans[at].X1 {
			return false
		}
	}
	return true
}

// Along the border is a line of which this share lies within rim px of where the region
// ends on one side, or all of whose deeper part is shorter.
const rimShare = 0.5

// along reports whether a path runs along the border of the region and not into it.
func (b *border) along(path []raster.Point, rim float64) bool {
	if rim <= 0 {
		return false
	}
	near, all := 0, 0
	for i := 1; i < len(path); i++ {
		p, q := path[i-1], path[i]
		n := int(math.Ceil(distance(p, q) / 4))
		if n == 0 {
			continue
		}
		dx, dy := (q.X-p.X)/distance(p, q), (q.Y-p.Y)/distance(p, q)
		for k := range n {
			t := (float64(k) + 0.5) / float64(n)
			x, y := p.X+t*(q.X-p.X), p.Y+t*(q.Y-p.Y)
			all++
			if b.ends(x-rim*dy, y+rim*dx) || b.ends(x+rim*dy, y-rim*dx) {
				near++
			}
		}
	}
	return all > 0 && float64(near) > rimShare*float64(all)
}

// ends reports whether the region does not hold a place; beyond the frame is no end of it.
func (b *border) ends(x, y float64) bool {
	ix, iy := int(math.Round(x)), int(math.Round(y))
	if ix < 0 || iy < 0 || ix >= b.width || iy >= b.height {
		return false
	}
	return !b.has(ix, iy)
}
