package raster

import (
	"math"
	"math/rand/v2"
	"slices"
)

// circleTrials is how many circles through three points are tried. With half of the
// points astray, 200 trials all miss with probability (1 − 0.5³)²⁰⁰ = 3·10⁻¹².
const circleTrials = 200

// FitCircle fits a circle to points, some of which may be astray. It takes the best
// of circles through three points (random sample consensus; Fischler and Bolles 1981; the
// sequence is fixed, so results repeat) by the median residual, keeps the points near
// it, and minimises their radial distances Σ(√((x−a)²+(y−b)²) − r)² by Gauss–Newton
// (Gander, Golub and Strebel 1994) from the algebraic fit of Kåsa (1976), with Huber's
// weights. It returns the points kept and the rms of their residuals.
func FitCircle(points []Point) (c Circle, used []Point, rms float64, ok bool) {
	if len(points) < 3 {
		return Circle{}, nil, 0, false
	}
	start, spread, ok := consensus(points)
	if !ok {
		return Circle{}, nil, 0, false
	}
	for range 2 {
		limit := max(3*1.4826*spread, 0.3)
		used = near(points, start, limit)
		if c, ok = kasa(used); !ok {
			return Circle{}, used, 0, false
		}
		for range 20 {
			if step := gaussNewton(&c, used, max(spread, 0.02)); step < 1e-7 {
				break
			}
		}
		start, spread = c, medianResidual(points, c)
	}
	if !finiteCircle(c) {
		return Circle{}, used, 0, false
	}
	return c, used, rmsResidual(used, c), true
}

func finiteCircle(c Circle) bool {
	return !math.IsNaN(c.X+c.Y+c.R) && !math.IsInf(c.X+c.Y+c.R, 0) && c.R > 0
}

func residual(p Point, c Circle) float64 { return math.Hypot(p.X-c.X, p.Y-c.Y) - c.R }

func near(points []Point, c Circle, limit float64) []Point {
	var out []Point
	for _, p := range points {
		if math.Abs(residual(p, c)) <= limit {
			out = append(out, p)
		}
	}
	return out
}

func medianResidual(points []Point, c Circle) float64 {
	r := make([]float64, len(points))
	for i, p := range points {
		r[i] = math.Abs(residual(p, c))
	}
	slices.Sort(r)
	return r[len(r)/2]
}

func rmsResidual(points []Point, c Circle) float64 {
	sum := 0.
	for _, p := range points {
		sum += residual(p, c) * residual(p, c)
	}
	return math.Sqrt(sum / float64(len(points)))
}

func consensus(points []Point) (best Circle, spread float64, ok bool) {
	random := rand.New(rand.NewPCG(1, 2))
	spread = math.Inf(1)
	for range circleTrials {
		i, j, k := random.IntN(len(points)), random.IntN(len(points)), random.IntN(len(points))
		c, fine := throughThree(points[i], points[j], points[k])
		if !fine {
			continue
		}
		if s := medianResidual(points, c); s < spread {
			best, spread, ok = c, s, true
		}
	}
	return best, spread, ok
}

// throughThree returns the circle through three points; false when they lie in line.
func throughThree(a, b, c Point) (Circle, bool) {
	bx, by, cx, cy := b.X-a.X, b.Y-a.Y, c.X-a.X, c.Y-a.Y
	d := 2 * (bx*cy - by*cx)
	if math.Abs(d) < 1e-9 {
		return Circle{}, false
	}
	b2, c2 := bx*bx+by*by, cx*cx+cy*cy
	x, y := (cy*b2-by*c2)/d, (bx*c2-cx*b2)/d
	return Circle{a.X + x, a.Y + y, math.Hypot(x, y)}, true
}

// kasa minimises Σ(x² + y² + Dx + Ey + F)², with coordinates from the mean.
func kasa(points []Point) (Circle, bool) {
	n := float64(len(points))
	mx, my := 0., 0.
	for _, p := range points {
		mx, my = mx+p.X/n, my+p.Y/n
	}
	var xx, xy, yy, xz, yz, z2 float64
	for _, p := range points {
		x, y := p.X-mx, p.Y-my
		z := x*x + y*y
		xx, xy, yy, xz, yz, z2 = xx+x*x, xy+x*y, yy+y*y, xz+x*z, yz+y*z, z2+z
	}
	d := 2 * (xx*yy - xy*xy)
	if len(points) < 3 || math.Abs(d) < 1e-9 {
		return Circle{}, false
	}
	x, y := (xz*yy-yz*xy)/d, (yz*xx-xz*xy)/d
	return Circle{mx + x, my + y, math.Sqrt(x*x + y*y + z2/n)}, true
}

// gaussNewton makes one weighted step and returns its length. Residuals beyond 1.345
// scale count less (Huber 1964).
func gaussNewton(c *Circle, points []Point, scale float64) float64 {
	var a [3][4]float64
	for _, p := range points {
		dx, dy := p.X-c.X, p.Y-c.Y
		d := math.Hypot(dx, dy)
		if d == 0 {
			continue
		}
		r, w := d-c.R, 1.
		if limit := 1.345 * 1.4826 * scale; math.Abs(r) > limit {
			w = limit / math.Abs(r)
		}
		j := [4]float64{dx / d, dy / d, 1, r}
		for row := range 3 {
			for col := range 4 {
				a[row][col] += w * j[row] * j[col]
			}
		}
	}
	step, ok := solve3(a)
	if !ok {
		return 0
	}
	c.X, c.Y, c.R = c.X+step[0], c.Y+step[1], c.R+step[2]
	return math.Abs(step[0]) + math.Abs(step[1]) + math.Abs(step[2])
}

// solve3 solves three linear equations by Gaussian elimination with pivoting.
func solve3(a [3][4]float64) ([3]float64, bool) {
	for col := range 3 {
		pivot := col
		for row := col + 1; row < 3; row++ {
			if math.Abs(a[row][col]) > math.Abs(a[pivot][col]) {
				pivot = row
			}
		}
		a[col], a[pivot] = a[pivot], a[col]
		if math.Abs(a[col][col]) < 1e-12 {
			return [3]float64{}, false
		}
		for row := range 3 {
			if row != col {
				f := a[row][col] / a[col][col]
				for k := col; k < 4; k++ {
					a[row][k] -= f * a[col][k]
				}
			}
		}
	}
	return [3]float64{a[0][3] / a[0][0], a[1][3] / a[1][1], a[2][3] / a[2][2]}, true
}
