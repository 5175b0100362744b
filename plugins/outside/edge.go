package outside

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// lendEdges gives zones that came from outside a distance to their edge, taken from
// their pixels: within a pixel of that of the shape they were drawn from. A zone that
// fills the frame has no edge.
func lendEdges(r *pipeline.Region) {
	m := r.Mask()
	for i, z := range r.Zones {
		if raster.SpanArea(z.Spans) < len(m.Bits) {
			r.Zones[i].EdgeDistancePx = edgeOf(z.Spans, m.Width, m.Height)
		}
	}
}

// edgeOf returns the distance of a point to the edge between pixels inside and outside
// of the spans: positive inside, negative outside.
func edgeOf(spans []raster.Span, width, height int) func(x, y float64) float64 {
	mask := raster.NewMask(width, height)
	mask.FillSpans(spans)
	return func(x, y float64) float64 {
		inside := mask.At(int(math.Floor(x+0.5)), int(math.Floor(y+0.5)))
		best := math.Inf(1)
		for dy := 0; float64(dy)-1 < best && dy <= 2*height; dy++ {
			for _, row := range []int{int(y) - dy, int(y) + dy} {
				dx := nearest(mask, x, row, !inside)
				best = min(best, math.Hypot(dx, float64(row)-y))
			}
		}
		if inside {
			return best - 0.5
		}
		return 0.5 - best
	}
}

// nearest returns how far along a row the nearest pixel is that is inside, or outside, of
// a mask. Beyond the picture everything is outside.
func nearest(m *raster.Mask, x float64, row int, wantInside bool) float64 {
	start := int(math.Floor(x + 0.5))
	for d := 0; d <= m.Width+1; d++ {
		left, right := start-d, start+d
		switch {
		case m.At(left, row) == wantInside && m.At(right, row) == wantInside:
			return min(math.Abs(float64(left)-x), math.Abs(float64(right)-x))
		case m.At(left, row) == wantInside:
			return math.Abs(float64(left) - x)
		case m.At(right, row) == wantInside:
			return math.Abs(float64(right) - x)
		}
	}
	return math.Inf(1)
}
