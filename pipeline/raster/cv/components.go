//go:build gocv_specific_modules

package cv

import (
	"fmt"

	"gocv.io/x/gocv"

	"lapgate/pipeline/raster"
)

// Component is one 8-connected set of pixels as OpenCV measures it.
type Component struct {
	X0, Y0, X1, Y1 int     // bounding box, half-open
	Area           int     // px
	X, Y           float64 // centroid of the pixel centres
}

// Components returns OpenCV's connectedComponentsWithStats of a mask, in the order of
// its labels, without the background.
func Components(m *raster.Mask) ([]Component, error) {
	var keep arena
	defer keep.close()
	data := make([]byte, len(m.Bits))
	for i, in := range m.Bits {
		if in {
			data[i] = 255
		}
	}
	src, err := keep.fromBytes(m.Height, m.Width, gocv.MatTypeCV8U, data)
	if err != nil {
		return nil, err
	}
	labels, stats, centroids := keep.empty(), keep.empty(), keep.empty()
	n := gocv.ConnectedComponentsWithStats(*src, labels, stats, centroids)
	if n < 1 {
		return nil, fmt.Errorf("connectedComponentsWithStats returned %d labels", n)
	}
	out := make([]Component, 0, n-1)
	for i := 1; i < n; i++ {
		out = append(out, componentAt(stats, centroids, i))
	}
	return out, nil
}

func componentAt(stats, centroids *gocv.Mat, i int) Component {
	at := func(k gocv.ConnectedComponentsTypes) int { return int(stats.GetIntAt(i, int(k))) }
	c := Component{X0: at(gocv.CC_STAT_LEFT), Y0: at(gocv.CC_STAT_TOP), Area: at(gocv.CC_STAT_AREA),
		X: centroids.GetDoubleAt(i, 0), Y: centroids.GetDoubleAt(i, 1)}
	c.X1, c.Y1 = c.X0+at(gocv.CC_STAT_WIDTH), c.Y0+at(gocv.CC_STAT_HEIGHT)
	return c
}
