package raster

import (
	"fmt"
	"math"
	"slices"
)

// OutlineSearch says how the outline of a silhouette is followed.
type OutlineSearch struct {
	Circle
	Inside, Outside float64 // px, how far from the circle it is looked for
	DarkInside      bool    // the part is darker than its surroundings
}

// outlineStep is the distance between two samples along a ray, px.
const outlineStep = 0.25

// Outline returns how far inwards of the circle the outline of a silhouette lies, in px,
// in evenly spaced directions about one px apart on the circle, from +x towards +y. In
// each it is where a walk from outside first crosses the middle between the level outside
// (of this ray) and the level inside (the median of all rays), linear between samples;
// Inside where it never does, NaN where the ray starts off the frame. The second result is
// the contrast, outside less inside, the median over the rays, DN.
func Outline(src *Plane, s OutlineSearch) (reach []float64, contrast float64) {
	if !(s.R > 0) || !(s.Inside > 0) || !(s.Outside > 1) {
		panic(fmt.Sprintf("raster: outline search %+v out of range", s))
	}
	n := max(int(math.Ceil(2*math.Pi*s.R)), 8)
	inner, steps := s.innerLevel(src, n), int((s.Inside+s.Outside)/outlineStep)
	reach = make([]float64, n)
	var contrasts []float64
	for k := range reach {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / float64(n))
		outer, ok := s.outerLevel(src, cos, sin)
		if !ok {
			reach[k] = math.NaN()
			continue
		}
		contrasts = append(contrasts, outer-inner)
		reach[k] = s.crossing(src, cos, sin, (outer+inner)/2, steps)
	}
	if len(contrasts) == 0 {
		return reach, 0
	}
	return reach, median(contrasts)
}

func (s OutlineSearch) at(src *Plane, cos, sin, r float64) (float64, bool) {
	return bilinear(src, s.X+r*cos, s.Y+r*sin)
}

// outerLevel is the mean of a few samples at the outer end of a ray.
func (s OutlineSearch) outerLevel(src *Plane, cos, sin float64) (float64, bool) {
	sum := 0.
	for i := range 4 {
		v, ok := s.at(src, cos, sin, s.R+s.Outside-float64(i)*outlineStep)
		if !ok {
			return 0, false
		}
		sum += v
	}
	return sum / 4, true
}

func (s OutlineSearch) innerLevel(src *Plane, n int) float64 {
	var values []float64
	for k := range n {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / float64(n))
		if v, ok := s.at(src, cos, sin, max(s.R-s.Inside, 0)); ok {
			values = append(values, v)
		}
	}
	if len(values) == 0 {
		return 0
	}
	slices.Sort(values)
	return values[len(values)/2]
}

// crossing walks inwards until the level is crossed into the part.
func (s OutlineSearch) crossing(src *Plane, cos, sin, level float64, steps int) float64 {
	last := math.NaN()
	for i := 0; i <= steps; i++ {
		r := s.R + s.Outside - float64(i)*outlineStep
		v, ok := s.at(src, cos, sin, max(r, 0))
		if !ok {
			return math.NaN()
		}
		if (v < level) == s.DarkInside && v != level {
			if f := (level - last) / (v - last); f >= 0 && f <= 1 {
				r += outlineStep * (1 - f)
			}
			return s.R - r
		}
		last = v
	}
	return s.Inside
}
