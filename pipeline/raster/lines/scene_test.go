package lines

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline/raster"
)

// noise is a plane of white noise of sigma 1.
func noise(width, height int, seed uint64) *raster.Plane {
	r := rand.New(rand.NewPCG(seed, 7))
	p := raster.NewPlane(width, height)
	for i := range p.Pix {
		p.Pix[i] = float32(r.NormFloat64())
	}
	return p
}

// draw adds a line of the given width and height, each pixel as far as the line covers it,
// on 8 × 8 places of it.
func draw(p *raster.Plane, x0, y0, x1, y1, width, height float64) {
	const n = 8
	length := math.Hypot(x1-x0, y1-y0)
	dx, dy := (x1-x0)/length, (y1-y0)/length
	for y := max(int(min(y0, y1)-width-2), 0); y <= min(int(max(y0, y1)+width+2), p.Height-1); y++ {
		for x := max(int(min(x0, x1)-width-2), 0); x <= min(int(max(x0, x1)+width+2), p.Width-1); x++ {
			if off := math.Abs((float64(y)-y0)*dx - (float64(x)-x0)*dy); off > width/2+1 {
				continue
			}
			in := 0
			for k := range n * n {
				u, v := float64(x)+(float64(k%n)+0.5)/n-0.5-x0, float64(y)+(float64(k/n)+0.5)/n-0.5-y0
				if along := u*dx + v*dy; along >= 0 && along <= length && math.Abs(v*dx-u*dy) <= width/2 {
					in++
				}
			}
			p.Pix[y*p.Stride+x] += float32(height * float64(in) / (n * n))
		}
	}
}

// segment is a line that lies in a picture.
type segment struct{ x0, y0, x1, y1 float64 }

// random places a segment of the given length anywhere in a picture, at any angle.
func random(r *rand.Rand, width, height int, length float64) segment {
	for {
		sin, cos := math.Sincos(2 * math.Pi * r.Float64())
		s := segment{x0: float64(width) * r.Float64(), y0: float64(height) * r.Float64()}
		s.x1, s.y1 = s.x0+length*cos, s.y0+length*sin
		if s.x1 >= 0 && s.y1 >= 0 && s.x1 < float64(width-1) && s.y1 < float64(height-1) {
			return s
		}
	}
}

// apart is how far the two ends of a found line lie from those of the segment, the mean.
func (s segment) apart(l Line) float64 {
	a, b := l.Path[0], l.Path[len(l.Path)-1]
	p, q := raster.Point{X: s.x0, Y: s.y0}, raster.Point{X: s.x1, Y: s.y1}
	return min(distance(a, p)+distance(b, q), distance(a, q)+distance(b, p)) / 2
}

// matches reports whether a found line lies on the segment: all of its points within 4 px,
// over at least half of its length.
func (s segment) matches(l Line) bool {
	length := math.Hypot(s.x1-s.x0, s.y1-s.y0)
	dx, dy := (s.x1-s.x0)/length, (s.y1-s.y0)/length
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range l.Path {
		along, beside := (p.X-s.x0)*dx+(p.Y-s.y0)*dy, (p.Y-s.y0)*dx-(p.X-s.x0)*dy
		if math.Abs(beside) > 4 {
			return false
		}
		low, high = min(low, along), max(high, along)
	}
	return min(high, length)-max(low, 0) > length/2
}
