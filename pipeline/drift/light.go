package drift

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// PatchLevel returns the mean of raw − dark over the good pixels of a box, in DN, and its
// standard uncertainty from the temporal noise of the camera. It is measured on the frame
// as received: stray light is part of it, and the response does not belong to it. The
// error says what is wrong with the box.
func PatchLevel(raw *raster.Plane, c *pipeline.Calibration, box pipeline.Box) (levelDN, uncertaintyDN float64, err error) {
	if box.X0 < 0 || box.Y0 < 0 || box.X1 > raw.Width || box.Y1 > raw.Height || box.X1 <= box.X0 || box.Y1 <= box.Y0 {
		return 0, 0, pipeline.Invalid("reference patch: got (%d, %d) to (%d, %d), want a box inside the frame of %d × %d px", box.X0, box.Y0, box.X1, box.Y1, raw.Width, raw.Height)
	}
	if c.Dark == nil || !c.Dark.SameSize(raw) {
		return 0, 0, pipeline.Invalid("reference patch: the calibration has no dark plane of %d × %d px", raw.Width, raw.Height)
	}
	bad := map[pipeline.PixelAt]bool{}
	for _, p := range c.BadPixels {
		bad[p] = true
	}
	sum, n := 0.0, 0.0
	for y := box.Y0; y < box.Y1; y++ {
		for x := box.X0; x < box.X1; x++ {
			if !bad[pipeline.PixelAt{X: x, Y: y}] {
				sum += float64(raw.At(x, y)) - float64(c.Dark.At(x, y))
				n++
			}
		}
	}
	if n == 0 {
		return 0, 0, pipeline.Invalid("reference patch: every pixel of it is bad")
	}
	level := sum / n
	return level, math.Sqrt((c.Noise.DarkDN*c.Noise.DarkDN + c.Noise.GainDNPerE*max(level, 0)) / n), nil
}

// Light holds the reference patch of a frame against its level at calibration.
func Light(raw *raster.Plane, c *pipeline.Calibration, b Bounds) (Reading, error) {
	if c.Reference == nil || !(c.Reference.LevelDN > 0) {
		return Reading{}, pipeline.Invalid("light: the calibration has no reference patch; calibrate with the patch's place")
	}
	level, u, err := PatchLevel(raw, c, c.Reference.Box)
	if err != nil {
		return Reading{}, err
	}
	calibrated := c.Reference.LevelDN
	return reading(pipeline.ProofLight, level/calibrated, u/calibrated, b,
		"less light than at calibration: lamp dead or aged, cap on, patch dirty or covered",
		"more light than at calibration: lamp power raised, or other light comes in"), nil
}
