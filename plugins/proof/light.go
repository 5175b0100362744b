package proof

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// patch is the reference patch with its level when the calibration was made.
type patch struct {
	box     pipeline.Box
	dark    *raster.Plane
	bad     map[pipeline.PixelAt]bool
	levelDN float64
	others  []otherLevel
}

// otherLevel is the patch's level in another view of the recipe.
type otherLevel struct {
	view    string
	levelDN float64
}

func newPatch(box pipeline.Box, c *pipeline.Calibration) (*patch, error) {
	p := &patch{box: box, dark: c.Dark, bad: map[pipeline.PixelAt]bool{}}
	for _, b := range c.BadPixels {
		p.bad[b] = true
	}
	level, err := calibratedLevel(box, c)
	if err != nil {
		return nil, err
	}
	if noise := max(c.Noise.DarkDN, 1); level < 10*noise {
		return nil, pipeline.Invalid("patch_width_px: the calibration's stray frames show %.2f DN above dark in the patch, want at least %.0f: it is not where the settings say, or it was covered", level, 10*noise)
	}
	p.levelDN = level
	return p, nil
}

// calibratedLevel is the patch's mean above dark: as the calibration states it for this
// very box, or over its stray frames, in which the patch shines too.
func calibratedLevel(box pipeline.Box, c *pipeline.Calibration) (float64, error) {
	if r := c.Reference; r != nil && r.Box == box && r.LevelDN > 0 {
		return r.LevelDN, nil
	}
	if c.Stray == nil {
		return 0, pipeline.Invalid("patch_width_px: the calibration has neither a reference patch nor stray frames; calibrate with one of them")
	}
	if box.X0 < 0 || box.Y0 < 0 || box.X1 > c.Stray.Width || box.Y1 > c.Stray.Height {
		return 0, pipeline.Invalid("patch_x_px: the patch reaches to (%d, %d), want it within the frame of %d × %d px", box.X1, box.Y1, c.Stray.Width, c.Stray.Height)
	}
	p := patch{box: box, bad: map[pipeline.PixelAt]bool{}}
	for _, b := range c.BadPixels {
		p.bad[b] = true
	}
	level, _ := p.mean(c.Stray, math.Inf(1))
	return level, nil
}

func otherLevels(box pipeline.Box, env pipeline.Environment) []otherLevel {
	var out []otherLevel
	for name, c := range env.Calibrations {
		if name == env.View || c == nil {
			continue
		}
		if level, err := calibratedLevel(box, c); err == nil {
			out = append(out, otherLevel{name, level})
		}
	}
	slices.SortFunc(out, func(a, b otherLevel) int {
		if a.view < b.view {
			return -1
		}
		return 1
	})
	return out
}

// mean returns the mean of plane − dark over the patch's good pixels, and the share of
// them that reaches top.
func (p *patch) mean(plane *raster.Plane, top float64) (level, saturated float64) {
	sum, n, over := 0., 0., 0.
	for y := p.box.Y0; y < p.box.Y1; y++ {
		row := plane.Row(y)
		for x := p.box.X0; x < p.box.X1; x++ {
			if p.bad[pipeline.PixelAt{X: x, Y: y}] {
				continue
			}
			v := float64(row[x])
			if v >= top {
				over++
			}
			if p.dark != nil {
				v -= float64(p.dark.At(x, y))
			}
			sum, n = sum+v, n+1
		}
	}
	return sum / max(n, 1), over / max(n, 1)
}

// saturatedPatch is the share of saturated pixels above which a patch has no level.
const saturatedPatch = 0.01

func (st *stage) proveLight(item *pipeline.Item, raw *raster.Plane) error {
	proof := pipeline.Proof{Name: pipeline.ProofLight, Low: st.s.MinLight, High: st.s.MaxLight, Unit: "1"}
	known := false
	if st.s.PhotodiodeTag != "" {
		known = true
		st.photodiode(&proof, item.Frames[0].Header.Tags)
	}
	if st.patch != nil && proof.Reason == "" {
		known = true
		if b := st.patch.box; b.X1 > raw.Width || b.Y1 > raw.Height || !raw.SameSize(st.patch.dark) {
			return pipeline.Invalid("patch_x_px: the patch reaches to (%d, %d) of a frame like the calibration's, the frame has %d × %d px", b.X1, b.Y1, raw.Width, raw.Height)
		}
		st.patchLight(&proof, item, raw)
	}
	if says := item.Frames[0].Header.Tags[st.s.LightTag]; st.s.LightTag != "" && says != st.light {
		known = true
		proof.Reason = fmt.Sprintf("the header's tag %s says %q, the view is calibrated for light %q: the views are swapped or the wrong lamp was on", st.s.LightTag, says, st.light)
	}
	if st.patch == nil && st.s.PhotodiodeTag == "" { // by the tag alone: nothing was measured
		proof.Low, proof.High = 0, 0
	}
	if known {
		proof.OK = proof.Reason == ""
		item.Prove(proof)
	}
	return nil
}

func (st *stage) photodiode(proof *pipeline.Proof, tags map[string]string) {
	text, there := tags[st.s.PhotodiodeTag]
	v, err := strconv.ParseFloat(text, 64)
	if !there || err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		proof.Reason = fmt.Sprintf("the header's tag %s is %q, want the photodiode's number", st.s.PhotodiodeTag, text)
		return
	}
	proof.Value = v / st.s.PhotodiodeNominal
	if proof.Value < proof.Low || proof.Value > proof.High {
		proof.Reason = fmt.Sprintf("the photodiode shows %.0f %% of its nominal light, want %.0f to %.0f: %s", 100*proof.Value, 100*proof.Low, 100*proof.High, lampCause(proof.Value))
	}
}

func (st *stage) patchLight(proof *pipeline.Proof, item *pipeline.Item, raw *raster.Plane) {
	level, over := st.patch.mean(raw, float64(item.Frames[0].Raw.Format.MaxCount()))
	item.Measure("patch_dn", level, "DN")
	proof.Value = level / st.patch.levelDN
	if over > saturatedPatch {
		proof.Reason = fmt.Sprintf("%.1f %% of the reference patch is saturated: the lamp is too bright or the exposure too long", 100*over)
		return
	}
	if proof.Value >= proof.Low && proof.Value <= proof.High {
		return
	}
	cause := lampCause(proof.Value)
	for _, o := range st.patch.others {
		if math.Abs(level-o.levelDN) <= 0.1*o.levelDN {
			cause += fmt.Sprintf(", or the views are swapped: it is the level of view %s", o.view)
		}
	}
	proof.Reason = fmt.Sprintf("the reference patch shows %.0f %% of the calibrated light (%.1f DN above dark for %.1f), want %.0f to %.0f %%: %s",
		100*proof.Value, level, st.patch.levelDN, 100*proof.Low, 100*proof.High, cause)
}

// offShare is the share of the calibrated light below which there is none.
const offShare = 0.05

func lampCause(share float64) string {
	switch {
	case share < offShare:
		return "the lamp is off, the lens is capped, or something covers it"
	case share < 1:
		return "the lamp is weak, or something covers part of its light"
	}
	return "the lamp is too bright"
}
