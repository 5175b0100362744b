//go:build gocv_specific_modules

package cv

import (
	"errors"
	"fmt"
	"image"

	"gocv.io/x/gocv"

	"lapgate/pipeline/raster"
)

// reduction is how many pixels of the frame make one of the small picture, per side.
const reduction = 16

// meanToSigma turns the mean absolute deviation of a normal distribution into its sigma, √(π/2).
const meanToSigma = 1.2533141

// TunedChain is the detection job as one would write it well with OpenCV: float32,
// preallocated Mats, background and noise on a picture reduced 16-fold, a separable
// 5 × 5 binomial filter, and connected components with two thresholds. It is the yardstick for
// speed. It serves one caller at a time, and counts at most 65 535 components.
type TunedChain struct {
	low, high                                 float32
	width, height                             int
	bad                                       []int // indices, row by row
	keep                                      arena
	dark, gain, signal, level, noise, tmp     *gocv.Mat
	small, smooth, snr, above, labels, stats  *gocv.Mat
	centroids, kernel, scratch, smallDeviance *gocv.Mat
}

// NewTunedChain returns a chain for Mono8 or Mono16 frames of dark's size. gain is what
// raw − dark is multiplied with; bad (may be nil) are pixels to replace. low and high are
// thresholds in sigmas. Close it.
func NewTunedChain(dark, gain *raster.Plane, bad *raster.Mask, low, high float32) (*TunedChain, error) {
	if !dark.SameSize(gain) || bad != nil && (bad.Width != dark.Width || bad.Height != dark.Height) {
		return nil, errors.New("dark, gain and bad must have one size")
	}
	if dark.Width < 5*reduction || dark.Height < 5*reduction {
		return nil, fmt.Errorf("got frames of %d × %d px, want at least %d px a side", dark.Width, dark.Height, 5*reduction)
	}
	c := &TunedChain{low: low, high: high, width: dark.Width, height: dark.Height}
	whole := func() *gocv.Mat { return c.keep.sized(c.height, c.width, gocv.MatTypeCV32F) }
	c.dark, c.gain, c.signal, c.level, c.noise, c.tmp, c.snr, c.scratch = whole(), whole(), whole(), whole(), whole(), whole(), whole(), whole()
	c.small, c.smooth, c.smallDeviance = c.keep.empty(), c.keep.empty(), c.keep.empty()
	c.above, c.labels, c.stats, c.centroids = c.keep.empty(), c.keep.empty(), c.keep.empty(), c.keep.empty()
	c.kernel = c.keep.sized(5, 1, gocv.MatTypeCV32F)
	for i, w := range []float32{1, 4, 6, 4, 1} {
		c.kernel.SetFloatAt(i, 0, w/16)
	}
	if err := errors.Join(load(c.dark, dark), load(c.gain, gain)); err != nil {
		c.Close()
		return nil, err
	}
	if bad != nil {
		for i, is := range bad.Bits {
			if is {
				c.bad = append(c.bad, i)
			}
		}
	}
	return c, nil
}

func load(m *gocv.Mat, p *raster.Plane) error {
	pix, err := m.DataPtrFloat32()
	if err != nil {
		return err
	}
	for y := range p.Height {
		copy(pix[y*p.Width:(y+1)*p.Width], p.Row(y))
	}
	return nil
}

// Close frees the Mats; it may be called again.
func (c *TunedChain) Close() { c.keep.close() }

// SetThreads sets OpenCV's own threads for the whole process; 1 compares like with like.
func SetThreads(n int) { gocv.SetNumThreads(n) }

// Run finds and measures the objects of a frame.
func (c *TunedChain) Run(raw raster.Raw) ([]Object, error) {
	if err := c.correct(raw); err != nil {
		return nil, err
	}
	if err := c.background(); err != nil {
		return nil, err
	}
	if err := c.filter(); err != nil {
		return nil, err
	}
	n := gocv.ConnectedComponentsWithStatsWithParams(*c.above, c.labels, c.stats, c.centroids, 8, gocv.MatTypeCV16U, gocv.CCL_DEFAULT)
	if n < 1 {
		return nil, fmt.Errorf("connectedComponentsWithStats returned %d labels", n)
	}
	return c.measure(n)
}

// correct writes (raw − dark)·gain with bad pixels replaced to signal.
func (c *TunedChain) correct(raw raster.Raw) error {
	var frame arena
	defer frame.close()
	types := map[raster.PixelFormat]gocv.MatType{raster.Mono8: gocv.MatTypeCV8U, raster.Mono10: gocv.MatTypeCV16U, raster.Mono12: gocv.MatTypeCV16U, raster.Mono16: gocv.MatTypeCV16U}
	t, ok := types[raw.Format]
	if !ok || raw.Width != c.width || raw.Height != c.height || raw.Stride != raw.Format.RowBytes(raw.Width) {
		return fmt.Errorf("got %s frame of %d × %d px, want Mono8, Mono10, Mono12 or Mono16 of %d × %d without gaps", raw.Format, raw.Width, raw.Height, c.width, c.height)
	}
	m, err := frame.fromBytes(raw.Height, raw.Width, t, raw.Data)
	if err != nil {
		return err
	}
	err = errors.Join(m.ConvertTo(c.tmp, gocv.MatTypeCV32F), gocv.Subtract(*c.tmp, *c.dark, c.tmp), gocv.Multiply(*c.tmp, *c.gain, c.signal))
	if err != nil {
		return err
	}
	return c.replaceBad()
}

// replaceBad takes the mean of the left and right neighbours.
func (c *TunedChain) replaceBad() error {
	pix, err := c.signal.DataPtrFloat32()
	if err != nil {
		return err
	}
	for _, i := range c.bad {
		x := i % c.width
		l, r := max(x-1, 0), min(x+1, c.width-1)
		pix[i] = (pix[i-x+l] + pix[i-x+r]) / 2
	}
	return nil
}

// background takes the level from signal and writes the noise.
func (c *TunedChain) background() error {
	whole, small := image.Pt(c.width, c.height), image.Pt(c.width/reduction, c.height/reduction)
	return errors.Join(
		gocv.Resize(*c.signal, c.small, small, 0, 0, gocv.InterpolationArea),
		gocv.MedianBlur(*c.small, c.smooth, 5),
		gocv.Resize(*c.smooth, c.level, whole, 0, 0, gocv.InterpolationLinear),
		gocv.AbsDiff(*c.signal, *c.level, c.scratch),
		gocv.Resize(*c.scratch, c.small, small, 0, 0, gocv.InterpolationArea),
		gocv.MedianBlur(*c.small, c.smallDeviance, 5),
		gocv.Resize(*c.smallDeviance, c.noise, whole, 0, 0, gocv.InterpolationLinear),
		gocv.Subtract(*c.signal, *c.level, c.signal),
	)
}

// filter writes the snr plane and what of it is above the low threshold.
func (c *TunedChain) filter() error {
	err := errors.Join(
		gocv.SepFilter2D(*c.signal, c.tmp, gocv.MatTypeCV32F, *c.kernel, *c.kernel, image.Pt(-1, -1), 0, gocv.BorderReflect101),
		gocv.Divide(*c.tmp, *c.noise, c.snr),
	)
	if err != nil {
		return err
	}
	gocv.Threshold(*c.snr, c.tmp, c.low*raster.MatchedGain*meanToSigma, 255, gocv.ThresholdBinary)
	return c.tmp.ConvertTo(c.above, gocv.MatTypeCV8U)
}
