package lines

import (
	"testing"

	"lapgate/pipeline/raster"
)

// Rings pass through the corners of a frame in short pieces, of which few lines of 128 px
// lie within: they are judged by what is seen of them all the same.
func TestRingsInCorners(t *testing.T) {
	centre := &raster.Point{X: 1900, Y: 1600}
	p := layNoise(4000, 3000, 700, 1.7, 5.5, 0, centre)
	if l := find(t, p, func(s *Settings) { s.Centre = centre }); len(l) > 0 {
		t.Error(lengths(l))
	}
}
