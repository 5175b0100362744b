package raster

import "math"

// compactRatio is the length over width up to which the centre is taken in a window.
const compactRatio = 2

// centre returns the centre of gravity of the signal. Of a compact blob it is taken in
// a Gaussian window as wide as the blob at half height (before smoothing), about the centre itself, so
// that the noise around a faint spot does not move it: the fixed point of
//
//	c = c + 2·Σ w·v·(x − c) / Σ w·v,  w = exp(−|x − c|²/2s²),  s² = (diameter/2.355)² − 1/2
//
// (windowed first moments; the same as winpos in the SEP library). Of other blobs it
// is the plain first moment over their pixels with positive signal.
func (w *window) centre(spans []Span, half Shape) (x, y float64) {
	x, y, ok := w.gravity(spans)
	if !ok {
		s := ShapeOf(spans)
		return s.X, s.Y
	}
	if half.Length > compactRatio*half.Width {
		return x, y
	}
	if u, v, ok := w.windowed(x, y, math.Sqrt(max(math.Pow(half.Diameter()/2.355, 2)-0.5, 0.5))); ok {
		return u, v
	}
	return x, y
}

// at returns the index of a frame pixel in the window.
func (w *window) at(x, y int) int { return (y-w.y0)*w.width + x - w.x0 }

func (w *window) gravity(spans []Span) (x, y float64, ok bool) {
	sum := 0.
	for _, s := range spans {
		for u := s.X0; u < s.X1; u++ {
			v := max(float64(w.signal[w.at(u, s.Y)]), 0)
			sum += v
			x += v * float64(u)
			y += v * float64(s.Y)
		}
	}
	return x / sum, y / sum, sum > 0
}

// windowed returns the fixed point from (x, y); false when it leaves the neighbourhood.
func (w *window) windowed(x, y, s float64) (float64, float64, bool) {
	startX, startY := x, y
	for range 10 {
		sum, dx, dy := 0., 0., 0.
		for i, in := range w.foot {
			if !in {
				continue
			}
			u, v := float64(w.x0+i%w.width)-x, float64(w.y0+i/w.width)-y
			k := math.Exp(-(u*u+v*v)/(2*s*s)) * float64(w.signal[i])
			sum, dx, dy = sum+k, dx+k*u, dy+k*v
		}
		if sum <= 0 {
			return 0, 0, false
		}
		x, y = x+2*dx/sum, y+2*dy/sum
		if math.Hypot(x-startX, y-startY) > s {
			return 0, 0, false
		}
		if math.Hypot(dx, dy) < 1e-4*sum {
			break
		}
	}
	return x, y, true
}
