//go:build gocv_specific_modules

package cv

import (
	"errors"
	"fmt"
	"image"
	"math"

	"gocv.io/x/gocv"

	"lapgate/pipeline/raster"
)

// LineBank is the line search as one would write it with OpenCV: the plane filtered with
// line kernels of several orientations, and the highest of their outputs at each pixel. It
// is the yardstick for the speed of another search. It serves one caller at a time.
type LineBank struct {
	keep              arena
	kernels           []*gocv.Mat
	plane, one, above *gocv.Mat
	width, height     int
}

// NewLineBank returns a bank of orientations line kernels of length px for planes of the
// given size. A kernel is a line 1 px wide, smoothed between pixels, with unit noise gain.
// Close it.
func NewLineBank(width, height, orientations, length int) (*LineBank, error) {
	if width < length || height < length || orientations < 1 || length < 3 || length%2 == 0 {
		return nil, fmt.Errorf("got %d × %d px, %d orientations of %d px; want planes not smaller than the kernels, of odd length", width, height, orientations, length)
	}
	b := &LineBank{width: width, height: height}
	b.plane, b.one, b.above = b.keep.sized(height, width, gocv.MatTypeCV32F), b.keep.empty(), b.keep.empty()
	for i := range orientations {
		k := b.keep.sized(length, length, gocv.MatTypeCV32F)
		drawKernel(k, math.Pi*float64(i)/float64(orientations), length)
		b.kernels = append(b.kernels, k)
	}
	return b, nil
}

// drawKernel writes a line through the middle, each pixel by its distance from it.
func drawKernel(k *gocv.Mat, angle float64, length int) {
	sin, cos := math.Sincos(angle)
	middle, square := float64(length/2), 0.
	values := make([]float64, length*length)
	for i := range values {
		dx, dy := float64(i%length)-middle, float64(i/length)-middle
		if along := dx*cos + dy*sin; math.Abs(along) <= float64(length)/2 {
			values[i] = max(1-math.Abs(dy*cos-dx*sin), 0)
			square += values[i] * values[i]
		}
	}
	for i, v := range values {
		k.SetFloatAt(i/length, i%length, float32(v/math.Sqrt(square)))
	}
}

// Close frees the Mats; it may be called again.
func (b *LineBank) Close() { b.keep.close() }

// Run filters a plane of unit noise and returns how many pixels are above threshold in one
// of the orientations.
func (b *LineBank) Run(p *raster.Plane, threshold float32) (int, error) {
	if p.Width != b.width || p.Height != b.height {
		return 0, fmt.Errorf("got %d × %d px, the bank is for %d × %d", p.Width, p.Height, b.width, b.height)
	}
	if err := load(b.plane, p); err != nil {
		return 0, err
	}
	var frame arena
	defer frame.close()
	highest := frame.empty()
	for i, k := range b.kernels {
		if err := gocv.Filter2D(*b.plane, b.one, gocv.MatTypeCV32F, *k, image.Pt(-1, -1), 0, gocv.BorderReflect101); err != nil {
			return 0, err
		}
		var err error
		if i == 0 {
			err = b.one.CopyTo(highest)
		} else {
			err = gocv.Max(*highest, *b.one, highest)
		}
		if err != nil {
			return 0, err
		}
	}
	gocv.Threshold(*highest, b.one, threshold, 1, gocv.ThresholdBinary)
	if err := b.one.ConvertTo(b.above, gocv.MatTypeCV8U); err != nil {
		return 0, errors.Join(errors.New("threshold"), err)
	}
	return gocv.CountNonZero(*b.above), nil
}
