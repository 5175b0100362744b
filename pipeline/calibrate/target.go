package calibrate

import (
	"fmt"
	"iter"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/raster"
)

// maxTargets is how many frames of a target are taken: each adds unknowns to the fit.
const maxTargets = 20

// checkTarget refuses a target that nobody could trace.
func (b *builder) checkTarget() error {
	c := b.req.Certificate
	switch {
	case b.req.Scale.UMPerPx != 0:
		return pipeline.Invalid("um_per_px: got %g and a dot target, want one of the two", b.req.Scale.UMPerPx)
	case !(c.PitchUM > 0):
		return pipeline.Invalid("dot target: got a pitch of %g µm, want that of its certificate", c.PitchUM)
	case !(c.UncertaintyUM > 0 && c.UncertaintyUM < 0.1*c.PitchUM):
		return pipeline.Invalid("dot target: got an uncertainty of %g µm for a pitch of %g, want the certificate's standard uncertainty (half of the one at k = 2)", c.UncertaintyUM, c.PitchUM)
	}
	if _, err := time.Parse(time.DateOnly, c.Date); err != nil {
		return pipeline.Invalid("dot target: got certificate date %q, want YYYY-MM-DD", c.Date)
	}
	if err := pipeline.CheckID("certificate serial", c.Serial); err != nil {
		return err
	}
	return b.checkNames()
}

// correctedFrame is a target's frame after flat-field.
type correctedFrame struct {
	plane     *raster.Plane
	saturated *raster.Mask // nil = no pixel
}

// corrected yields the frames of a kind as (raw − dark − stray) / response, bad pixels
// replaced, and notes their files.
func (b *builder) corrected(kind string, frames iter.Seq2[Frame, error], check func(Frame) error) iter.Seq2[correctedFrame, error] {
	return func(yield func(correctedFrame, error) bool) {
		n := 0
		for f, err := range frames {
			if n++; n > maxTargets && err == nil {
				err = fmt.Errorf("more than %d frames: leave some out", maxTargets)
			}
			if err == nil {
				err = check(f)
			}
			var out correctedFrame
			if err == nil {
				out, err = b.correct(f.Raw)
			}
			if err != nil {
				yield(correctedFrame{}, pipeline.Invalid("%s: %s: %w", kind, f.Name, err))
				return
			}
			b.from.Frames = append(b.from.Frames, sourceFrame(kind, f))
			if !yield(out, nil) {
				return
			}
		}
		if n == 0 {
			yield(correctedFrame{}, pipeline.Invalid("%s: got no frames, want at least one", kind))
		}
	}
}

func (b *builder) correct(raw raster.Raw) (correctedFrame, error) {
	p, err := raw.Plane()
	if err != nil {
		return correctedFrame{}, err
	}
	out := correctedFrame{plane: p}
	top := float32(raw.Format.MaxCount())
	for i, v := range p.Pix {
		if v >= top {
			if out.saturated == nil {
				out.saturated = raster.NewMask(p.Width, p.Height)
			}
			out.saturated.Bits[i] = true
		}
		v -= b.cal.Dark.Pix[i]
		if b.cal.Stray != nil {
			v -= b.cal.Stray.Pix[i]
		}
		if b.cal.Response != nil {
			v /= b.cal.Response.Pix[i] // above 0: see normalise
		}
		p.Pix[i] = v
	}
	raster.ReplaceBad(p, b.bad.mask)
	return out, nil
}

// dots takes scale and distortion from a dot target. A target may be exposed as it needs.
func (b *builder) dots(in Inputs) error {
	if in.Dots == nil {
		return nil
	}
	var grids [][]dots.Placed
	for f, err := range b.corrected("dots", in.Dots, b.sameButExposure) {
		if err != nil {
			return err
		}
		grid, err := dots.Assign(dots.Find(f.plane, b.bad.mask, nil, dots.GridThresholds()))
		if err != nil {
			return pipeline.Invalid("dots: frame %d: %w", len(grids)+1, err)
		}
		grids = append(grids, grid)
	}
	c := b.req.Certificate
	scale, err := dots.FitScale(grids, c, b.cal.Capture.Width, b.cal.Capture.Height)
	if err != nil {
		return err
	}
	b.from.Target, b.cal.Distortion = &scale, scale.Distortion
	b.cal.Scale = pipeline.Scale{UMPerPx: scale.UMPerPx, UncertaintyUM: scale.UncertaintyUM, Source: fmt.Sprintf("dot target %s, certificate of %s", c.Serial, c.Date)}
	return nil
}

// sizing fits the sizing curve. Frames are exposed as frames of parts are: flux counts.
func (b *builder) sizing(in Inputs) error {
	if in.Sizing == nil {
		return nil
	}
	if len(b.req.SizingDiameters) == 0 {
		return pipeline.Invalid("sizing: no diameters of the target's dots were given, want a list, row by row from the top")
	}
	n := 0
	for f, err := range b.corrected("sizing", in.Sizing, b.same) {
		if err != nil {
			return err
		}
		n++
		grid, err := dots.Assign(dots.Find(f.plane, b.bad.mask, f.saturated, dots.DefaultThresholds()))
		if err != nil {
			return pipeline.Invalid("sizing: frame %d: %w", n, err)
		}
		known, err := dots.Match(unsaturated(grid), b.req.SizingDiameters)
		if err != nil {
			return pipeline.Invalid("sizing: frame %d: %w", n, err)
		}
		b.from.SizingDots = append(b.from.SizingDots, known...)
	}
	curve, err := dots.FitSizing(b.from.SizingDots)
	b.cal.Sizing = &curve
	return err
}

func unsaturated(grid []dots.Placed) []dots.Placed {
	var out []dots.Placed
	for _, d := range grid {
		if !d.Saturated {
			out = append(out, d)
		}
	}
	return out
}
