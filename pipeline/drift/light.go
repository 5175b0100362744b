package drift

import (
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// PatchLevel returns the mean of raw − dark over the good pixels of a box, in DN, and its
// standard uncertainty from the temporal noise of the camera. It is measured on the frame
// as received: stray light is part of it, and the response does not belong to it. The
// error says what is wrong with the box.
func PatchLevel(raw *raster.Plane, c *pipeline.Calibration, box pipeline.Box) (levelDN, uncertaintyDN float64, err error) {
	if c.Dark == nil || !c.Dark.SameSize(raw) {
		return 0, 0, pipeline.Invalid("reference patch: the calibration has no dark plane of %d × %d px", raw.Width, raw.Height)
	}
	level, n, err := meanAbove(raw, c.Dark, c.BadPixels, box)
	if err != nil {
		return 0, 0, err
	}
	return level, math.Sqrt((c.Noise.DarkDN*c.Noise.DarkDN + c.Noise.GainDNPerE*max(level, 0)) / n), nil
}

// meanAbove returns the mean of plane − dark over the good pixels of a box and how many
// they are; dark may be nil.
func meanAbove(plane, dark *raster.Plane, badPixels []pipeline.PixelAt, box pipeline.Box) (mean, n float64, err error) {
	if box.X0 < 0 || box.Y0 < 0 || box.X1 > plane.Width || box.Y1 > plane.Height || box.X1 <= box.X0 || box.Y1 <= box.Y0 {
		return 0, 0, pipeline.Invalid("reference patch: got (%d, %d) to (%d, %d), want a box inside the frame of %d × %d px", box.X0, box.Y0, box.X1, box.Y1, plane.Width, plane.Height)
	}
	bad := map[pipeline.PixelAt]bool{}
	for _, p := range badPixels {
		if p.X >= box.X0 && p.X < box.X1 && p.Y >= box.Y0 && p.Y < box.Y1 {
			bad[p] = true
		}
	}
	sum := 0.0
	for y := box.Y0; y < box.Y1; y++ {
		for x := box.X0; x < box.X1; x++ {
			if bad[pipeline.PixelAt{X: x, Y: y}] {
				continue
			}
			sum += float64(plane.At(x, y))
			if dark != nil {
				sum -= float64(dark.At(x, y))
			}
			n++
		}
	}
	if n == 0 {
		return 0, 0, pipeline.Invalid("reference patch: every pixel of it is bad")
	}
	return sum / n, n, nil
}

// Patch is a reference patch with its level when the calibration was made.
type Patch struct {
	Box     pipeline.Box
	LevelDN float64
}

// leastPatchNoises is how many times the dark noise (at least 1 DN) a patch must shine.
const leastPatchNoises = 10

// NewPatch returns the patch of a box: its level is the calibration's own for this very
// box, or else that of its stray frames, in which the patch shines too.
func NewPatch(c *pipeline.Calibration, box pipeline.Box) (Patch, error) {
	p := Patch{Box: box}
	switch r := c.Reference; {
	case r != nil && r.Box == box && r.LevelDN > 0:
		p.LevelDN = r.LevelDN
	case c.Stray == nil:
		return p, pipeline.Invalid("reference patch: the calibration has neither this patch nor stray frames; calibrate with one of them")
	default:
		level, _, err := meanAbove(c.Stray, nil, c.BadPixels, box)
		if err != nil {
			return p, err
		}
		p.LevelDN = level
	}
	if least := leastPatchNoises * max(c.Noise.DarkDN, 1); p.LevelDN < least {
		return p, pipeline.Invalid("reference patch: the calibration shows %.2f DN above dark in it, want at least %.0f: it is not where the box says, or it was covered", p.LevelDN, least)
	}
	return p, nil
}

// saturatedPatch is the share of saturated pixels above which a patch has no level.
const saturatedPatch = 0.01

// Light holds the patch in a frame against its level at calibration. levelDN is what was
// read. Where pixels reach maxCount the patch has no level and the reading is a hold.
func (p Patch) Light(raw *raster.Plane, maxCount int, c *pipeline.Calibration, b Bounds) (r Reading, levelDN float64, err error) {
	level, u, err := PatchLevel(raw, c, p.Box)
	if err != nil {
		return Reading{}, 0, err
	}
	r = lightReading(level/p.LevelDN, u/p.LevelDN, b)
	r.What = fmt.Sprintf("the reference patch shows %.1f DN above dark for %.1f", level, p.LevelDN)
	if over := p.saturated(raw, float32(maxCount)); over > saturatedPatch {
		r.State, r.Cause = Held, fmt.Sprintf("%.1f %% of the reference patch is saturated: the lamp is too bright or the exposure too long", 100*over)
	}
	return r, level, nil
}

func (p Patch) saturated(raw *raster.Plane, top float32) float64 {
	over := 0.
	for y := p.Box.Y0; y < p.Box.Y1; y++ {
		for _, v := range raw.Row(y)[p.Box.X0:p.Box.X1] {
			if v >= top {
				over++
			}
		}
	}
	return over / float64((p.Box.X1-p.Box.X0)*(p.Box.Y1-p.Box.Y0))
}

// Photodiode holds a photodiode's value against its nominal one.
func Photodiode(value, nominal float64, b Bounds) Reading {
	r := lightReading(value/nominal, 0, b)
	r.What = fmt.Sprintf("the photodiode shows %.0f %% of its nominal light", 100*r.Value)
	return r
}

// offShare is the share of the calibrated light below which there is none.
const offShare = 0.05

func lightReading(share, uncertainty float64, b Bounds) Reading {
	low := "the lamp is weak, or something covers part of its light"
	if !(share >= offShare) {
		low = "the lamp is off, the lens is capped, or something covers it"
	}
	return reading(pipeline.ProofLight, share, uncertainty, b, low, "the lamp is too bright, or other light comes in")
}
