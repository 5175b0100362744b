package raster

import (
	"math"
	"slices"
)

// corePart is how deep, as a share of the greatest depth, a pixel must lie within the
// half-height region to count for the plateau.
const corePart = 0.75

// halfHeight returns the height of a blob's plateau (DN) and the shape of the region
// where the smoothed signal is at least half of it. The plateau is the mean of the
// signal over the region's core, the pixels deep inside it: chosen by place and not by
// value, so noise does not raise it. Region and plateau are found in turn.
func (w *window) halfHeight() (height float64, s Shape) {
	height = float64(slices.Max(w.smooth))
	for range 6 {
		next := w.plateau(height / 2)
		done := math.Abs(next-height) < 0.002*height
		height = next
		if done {
			break
		}
	}
	if height <= 0 {
		return 0, Shape{}
	}
	return height, w.above(float32(height / 2)).shape(0)
}

// plateau returns the mean of the smoothed signal over the core of the region above half.
func (w *window) plateau(half float64) float64 {
	depth := w.depths(float32(half))
	least := corePart * slices.Max(depth)
	sum, n := 0., 0
	for i, d := range depth {
		if d > 0 && d >= least {
			sum += float64(w.smooth[i])
			n++
		}
	}
	if n == 0 {
		return 2 * half
	}
	return sum / float64(n)
}

// depths returns each pixel's distance to the nearest one below half (chamfer 1, √2;
// Borgefors 1986); the window's rim counts as below.
func (w *window) depths(half float32) []float32 {
	d := make([]float32, len(w.smooth))
	at := func(x, y int) float32 {
		if x < 0 || y < 0 || x >= w.width || y >= w.height {
			return 0
		}
		return d[y*w.width+x]
	}
	const diagonal = float32(math.Sqrt2)
	for y := range w.height {
		for x := range w.width {
			if i := y*w.width + x; w.smooth[i] >= half {
				d[i] = min(at(x-1, y)+1, at(x, y-1)+1, at(x-1, y-1)+diagonal, at(x+1, y-1)+diagonal)
			}
		}
	}
	for y := w.height - 1; y >= 0; y-- {
		for x := w.width - 1; x >= 0; x-- {
			if i := y*w.width + x; d[i] > 0 {
				d[i] = min(d[i], at(x+1, y)+1, at(x, y+1)+1, at(x+1, y+1)+diagonal, at(x-1, y+1)+diagonal)
			}
		}
	}
	return d
}

// above returns the moments of the region where the smoothed signal, linear between
// pixel centres, is at least half: in each square of four centres the part on that
// side of the contour (marching squares), in frame coordinates.
func (w *window) above(half float32) sums {
	var m sums
	var buffer [8]Point
	for y := range w.height - 1 {
		for x := range w.width - 1 {
			i := y*w.width + x
			c := [4]float32{w.smooth[i], w.smooth[i+1], w.smooth[i+w.width+1], w.smooth[i+w.width]}
			if max(c[0], c[1], c[2], c[3]) >= half {
				m.addPolygon(clipSquare(buffer[:0], c, half, float64(w.x0+x), float64(w.y0+y)))
			}
		}
	}
	return m
}

// clipSquare returns the part of the unit square at (x, y) where the values c at its
// corners, from the top left clockwise as seen, are at least half along its edges.
func clipSquare(dst []Point, c [4]float32, half float32, x, y float64) []Point {
	corners := [4]Point{{x, y}, {x + 1, y}, {x + 1, y + 1}, {x, y + 1}}
	for k := range 4 {
		a, b, p, q := c[k], c[(k+1)%4], corners[k], corners[(k+1)%4]
		if a >= half {
			dst = append(dst, p)
		}
		if (a >= half) != (b >= half) {
			f := float64(half-a) / float64(b-a)
			dst = append(dst, Point{p.X + f*(q.X-p.X), p.Y + f*(q.Y-p.Y)})
		}
	}
	return dst
}
