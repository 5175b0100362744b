package raster

import "math"

// contourLength returns the length of the contour along which the smoothed signal,
// linear between pixel centres, is half: the same contour that above encloses.
func (w *window) contourLength(half float32) float64 {
	total := 0.
	for y := range w.height - 1 {
		for x := range w.width - 1 {
			i := y*w.width + x
			total += squareContour([4]float32{w.smooth[i], w.smooth[i+1], w.smooth[i+w.width+1], w.smooth[i+w.width]}, half)
		}
	}
	return total
}

// squareContour returns the length of the contour inside a unit square whose corners,
// clockwise from the top left, have the values c. In a saddle each crossing where the
// contour leaves the region is joined to the next, as in clipSquare.
func squareContour(c [4]float32, half float32) float64 {
	corners := [4]Point{{0, 0}, {1, 0}, {1, 1}, {0, 1}}
	var leaves, enters [2]Point
	n, m, first := 0, 0, false
	for k := range 4 {
		a, b, p, q := c[k], c[(k+1)%4], corners[k], corners[(k+1)%4]
		if (a >= half) == (b >= half) {
			continue
		}
		f := float64(half-a) / float64(b-a)
		at := Point{p.X + f*(q.X-p.X), p.Y + f*(q.Y-p.Y)}
		if a >= half {
			leaves[n] = at
			n++
		} else {
			first = first || n == 0 // the contour entered before it left
			enters[m] = at
			m++
		}
	}
	total := 0.
	for k := range n {
		to := k
		if first {
			to = (k + 1) % m
		}
		total += math.Hypot(leaves[k].X-enters[to].X, leaves[k].Y-enters[to].Y)
	}
	return total
}

// geodesic returns the length along the course and the thickness of a thin region that
// may bend, coil or branch, from its area A and the length P of its contour: of the
// rectangle with A = length·width and P = 2·(length + width) (geodesic length and
// thickness, ISO 9276-6; value from memory). It returns false for a region too compact
// to be such a rectangle.
func geodesic(area, contour float64) (length, width float64, ok bool) {
	root := contour*contour/16 - area
	if area <= 0 || root < 0 {
		return 0, 0, false
	}
	length = contour/4 + math.Sqrt(root)
	return length, area / length, true
}
