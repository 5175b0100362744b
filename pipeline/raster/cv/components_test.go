//go:build gocv_specific_modules

package cv

import (
	"cmp"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"lapgate/pipeline/raster"
)

// Outside truth: on the same mask, area, bounding box and centroid of every blob equal
// OpenCV's connectedComponentsWithStats.
func TestComponentsEqualOpenCV(t *testing.T) {
	random := rand.New(rand.NewPCG(8, 1))
	for round := range 60 {
		m := raster.NewMask(1+random.IntN(90), 1+random.IntN(70))
		density := 0.05 + 0.9*random.Float64()
		for i := range m.Bits {
			m.Bits[i] = random.Float64() < density
		}
		theirs, err := Components(m)
		if err != nil {
			t.Fatal(err)
		}
		var ours []Component
		for _, spans := range raster.Components(m) {
			ours = append(ours, ourComponent(spans))
		}
		slices.SortFunc(theirs, order)
		slices.SortFunc(ours, order)
		if len(ours) != len(theirs) {
			t.Fatalf("round %d: %d blobs, OpenCV %d", round, len(ours), len(theirs))
		}
		for i, o := range ours {
			c := theirs[i]
			if math.Abs(o.X-c.X) > 1e-9 || math.Abs(o.Y-c.Y) > 1e-9 {
				t.Fatalf("round %d: %+v, OpenCV %+v", round, o, c)
			}
			o.X, o.Y = c.X, c.Y
			if o != c {
				t.Fatalf("round %d: %+v, OpenCV %+v", round, o, c)
			}
		}
	}
}

func order(a, b Component) int {
	return cmp.Or(cmp.Compare(a.Area, b.Area), cmp.Compare(a.Y0, b.Y0), cmp.Compare(a.X0, b.X0), cmp.Compare(a.Y1, b.Y1), cmp.Compare(a.X1, b.X1),
		cmp.Compare(math.Round(a.X*1e6), math.Round(b.X*1e6)), cmp.Compare(math.Round(a.Y*1e6), math.Round(b.Y*1e6)))
}

func ourComponent(spans []raster.Span) Component {
	s := raster.ShapeOf(spans)
	c := Component{X0: spans[0].X0, X1: spans[0].X1, Y0: spans[0].Y, Y1: spans[len(spans)-1].Y + 1, Area: int(s.Area), X: s.X, Y: s.Y}
	for _, r := range spans {
		c.X0, c.X1 = min(c.X0, r.X0), max(c.X1, r.X1)
	}
	return c
}
