package merge

import (
	"math"

	"lapgate/pipeline"
)

// seen is a defect of one view with its shape in µm on the station.
type seen struct {
	pipeline.Defect
	path   []pipeline.Point // µm; at least two points for a long defect, else none
	radius float64          // µm, of a short defect; half the width of a long one
	lo, hi pipeline.Point   // corners of the bounding box, extent included
}

// longRatio is the length over width above which a defect without a path is long.
const longRatio = 4

func see(d pipeline.Defect, view *pipeline.Item) seen {
	d.View = view.View
	s := seen{Defect: d, radius: max(d.DiameterUM, d.LengthUM) / 2}
	if g := view.Geometry; g != nil {
		s.path = pathUM(d, g)
	}
	if s.long() {
		s.radius = d.WidthUM / 2
	}
	s.lo = pipeline.Point{X: d.UUM, Y: d.VUM}
	s.hi = s.lo
	for _, p := range s.path {
		s.lo = pipeline.Point{X: min(s.lo.X, p.X), Y: min(s.lo.Y, p.Y)}
		s.hi = pipeline.Point{X: max(s.hi.X, p.X), Y: max(s.hi.Y, p.Y)}
	}
	s.lo.X, s.lo.Y = s.lo.X-s.radius, s.lo.Y-s.radius
	s.hi.X, s.hi.Y = s.hi.X+s.radius, s.hi.Y+s.radius
	return s
}

// pathUM returns the path of a long defect, or the segment along its long axis where
// the stage that found it gave none.
func pathUM(d pipeline.Defect, g pipeline.Geometry) []pipeline.Point {
	path := d.Path
	if len(path) < 2 {
		if d.LengthUM <= longRatio*d.WidthUM || d.LengthPx <= 0 {
			return nil
		}
		sin, cos := math.Sincos(d.AngleDeg * math.Pi / 180)
		h := d.LengthPx / 2
		path = []pipeline.Point{{X: d.XPx - h*cos, Y: d.YPx - h*sin}, {X: d.XPx + h*cos, Y: d.YPx + h*sin}}
	}
	out := make([]pipeline.Point, len(path))
	for i, p := range path {
		out[i].X, out[i].Y, _ = g.ToStation(p.X, p.Y)
	}
	return out
}

func (s *seen) long() bool { return len(s.path) > 1 }

// length is the size by which the whole is told from its part.
func (s *seen) length() float64 {
	if !s.long() {
		return 2 * s.radius
	}
	total := 0.0
	for i := 1; i < len(s.path); i++ {
		total += math.Hypot(s.path[i].X-s.path[i-1].X, s.path[i].Y-s.path[i-1].Y)
	}
	return total
}

// apart returns the gap between the bounding boxes along the axis where it is larger;
// negative where they overlap.
func (s *seen) apart(o *seen) float64 {
	return max(s.lo.X-o.hi.X, o.lo.X-s.hi.X, s.lo.Y-o.hi.Y, o.lo.Y-s.hi.Y)
}

// outside returns how far the farthest point of s, extent included, lies outside the
// body of the long defect whole; 0 where all of it lies inside.
func (s *seen) outside(whole *seen) float64 {
	if !s.long() {
		d := pipeline.ToPath(pipeline.Point{X: s.UUM, Y: s.VUM}, whole.path) + s.radius - whole.radius
		return max(d, 0)
	}
	far := 0.0
	for _, p := range dense(s.path) {
		far = max(far, pipeline.ToPath(p, whole.path)-whole.radius)
	}
	return far
}

// dense adds the middle and quarter points of every segment, so that a path of few
// points cannot step over a bend of the other.
func dense(path []pipeline.Point) []pipeline.Point {
	out := []pipeline.Point{path[0]}
	for i := 1; i < len(path); i++ {
		a, b := path[i-1], path[i]
		for _, t := range []float64{0.25, 0.5, 0.75, 1} {
			out = append(out, pipeline.Point{X: a.X + t*(b.X-a.X), Y: a.Y + t*(b.Y-a.Y)})
		}
	}
	return out
}
