package pipeline

import "math"

// ToPath returns the distance from p to the nearest point of a path, px; +Inf for a path of
// fewer than two points.
func ToPath(p Point, path []Point) float64 {
	best := math.Inf(1)
	for i := 1; i < len(path); i++ {
		a, b := path[i-1], path[i]
		dx, dy := b.X-a.X, b.Y-a.Y
		t := 0.
		if l := dx*dx + dy*dy; l > 0 {
			t = min(max(((p.X-a.X)*dx+(p.Y-a.Y)*dy)/l, 0), 1)
		}
		best = min(best, math.Hypot(p.X-a.X-t*dx, p.Y-a.Y-t*dy))
	}
	return best
}
