package outside

import (
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/stagepb"
)

// lendEdges gives zones that came from outside a distance to their edge, taken from
// their pixels: within a pixel of that of the shape they were drawn from. A zone that
// fills the frame has no edge, nor has one that says so; one with an outline has its own.
func lendEdges(r *pipeline.Region, told []*stagepb.Zone) {
	m := r.Mask()
	for i, z := range r.Zones {
		if z.Outline == nil && !told[i].GetNoEdge() && raster.SpanArea(z.Spans) < len(m.Bits) {
			r.Zones[i].EdgeDistancePx = edgeOf(z.Spans, m.Width, m.Height)
		}
	}
}

// outlined refuses an outline that is not that of the zone's pixels.
func outlined(z pipeline.Zone) error {
	o := z.Outline
	if o == nil {
		return nil
	}
	if !finite(o.CentreX, o.CentreY, o.InnerPx, o.OuterPx) || o.InnerPx < 0 || o.OuterPx < 0 || len(o.Corners) > maxCorners {
		return fmt.Errorf("its outline has the radii %g and %g px and %d corners, want finite numbers and at most %d corners", o.InnerPx, o.OuterPx, len(o.Corners), maxCorners)
	}
	for _, s := range z.Spans {
		for _, x := range []int{s.X0, s.X1 - 1} {
			if d := o.Distance(float64(x), float64(s.Y)); !(d >= -1) {
				return fmt.Errorf("its pixel (%d, %d) lies %.1f px outside of its outline", x, s.Y, -d)
			}
		}
	}
	return nil
}

// maxCorners is how many corners an outline can have.
const maxCorners = 1000

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
