package calibrate

import (
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/drift"
	"lapgate/pipeline/raster"
)

// PartSearch says how the conforming part is found, as the stage region has it.
type PartSearch struct {
	DiameterMM float64
	Polarity   string // bright, dark or rim
}

// partTolerance is how much the part's diameter may differ from the one stated, relative
// to it: the scale may be off too.
const partTolerance = 0.05

// part measures the outline of a conforming part: the reference of focus and scale.
func (b *builder) part(in Inputs) error {
	if in.Part == nil {
		return nil
	}
	s := b.req.Part
	if !(s.DiameterMM > 0) || !slices.Contains([]string{"bright", "dark", "rim"}, s.Polarity) {
		return pipeline.Invalid("part: got a diameter of %g mm and polarity %q, want the part's diameter and bright, dark or rim", s.DiameterMM, s.Polarity)
	}
	edge := pipeline.PartEdge{}
	for f, err := range in.Part {
		if err == nil {
			err = b.same(f)
		}
		if err != nil {
			return pipeline.Invalid("part: %s: %w", f.Name, err)
		}
		raw, err := f.Raw.Plane()
		if err != nil {
			return pipeline.Invalid("part: %s: %w", f.Name, err)
		}
		fit, err := raster.FindCircle(raw, b.search(s))
		if err != nil {
			return pipeline.Invalid("part: %s: %w", f.Name, err)
		}
		if fit.EdgeWidth <= 0 {
			return pipeline.Invalid("part: %s: the edge has no width that can be measured, want an outline with a clear step", f.Name)
		}
		edge.WidthPx, edge.DiameterPx = edge.WidthPx+fit.EdgeWidth, edge.DiameterPx+2*fit.R
		edge.Frames++
		b.from.Frames = append(b.from.Frames, sourceFrame("part", f))
	}
	if edge.Frames == 0 {
		return pipeline.Invalid("part: got no frames, want at least one")
	}
	edge.WidthPx /= float64(edge.Frames)
	edge.DiameterPx /= float64(edge.Frames)
	b.cal.PartEdge = &edge
	return nil
}

func (b *builder) search(s PartSearch) raster.CircleSearch {
	c := b.cal.Capture
	r := s.DiameterMM * 500 / b.cal.Scale.UMPerPx
	return raster.CircleSearch{X: float64(c.Width-1) / 2, Y: float64(c.Height-1) / 2, Reach: float64(min(c.Width, c.Height)) / 4,
		RMin: (1 - partTolerance) * r, RMax: (1 + partTolerance) * r, DarkInside: s.Polarity == "dark", Ridge: s.Polarity == "rim"}
}

// The reference patch must be bright enough to tell the lamp by, and have room above.
const (
	leastPatchShare = 0.05 // of full scale, common practice
	mostPatchShare  = 0.85
)

// patch measures the level of the reference patch on frames of parts, or of the light
// trap where none were given.
func (b *builder) patch(in Inputs) error {
	if b.req.Patch == nil {
		return nil
	}
	frames, kind := in.Part, "part"
	if frames == nil {
		frames, kind = in.Stray, "stray"
	}
	if frames == nil {
		return pipeline.Invalid("reference patch: no frames show it, want frames of a part or of the light trap")
	}
	var levels []float64
	for f, err := range frames {
		if err != nil {
			return pipeline.Invalid("%s: %w", kind, err)
		}
		raw, err := f.Raw.Plane()
		if err != nil {
			return pipeline.Invalid("%s: %s: %w", kind, f.Name, err)
		}
		level, _, err := drift.PatchLevel(raw, b.cal, *b.req.Patch)
		if err != nil {
			return err
		}
		levels = append(levels, level)
	}
	mean, sd := meanAndSD(levels)
	full := float64(b.cal.Capture.Format.MaxCount())
	if mean < leastPatchShare*full || mean > mostPatchShare*full || math.IsNaN(mean) {
		return pipeline.Invalid("reference patch: its level is %.1f DN above dark, want %.1f to %.1f: is the box on the patch, and the patch lit?",
			mean, leastPatchShare*full, mostPatchShare*full)
	}
	b.cal.Reference = &pipeline.ReferencePatch{Box: *b.req.Patch, LevelDN: mean, SpreadDN: sd, Frames: len(levels)}
	return nil
}
