// Package deflectometry is the stage that sees a mirror's slopes in the fringes of a
// screen that it reflects. It measures no height: see the caution below.
//
// A slope α turns the reflected ray by 2α, so that a camera pixel sees the screen moved
// by s = distance · tan 2α; a phase of φ is s = φ·period / 2π. With one distance, a part
// that lies Δh higher moves the fringes too, by about Δh · tan(angle of view): height and
// slope cannot be told apart. The stage takes the best surface of second order off, in
// which the part's form, its tilt and its height mostly are; what is left is slope only as
// far as the part is thin beside the distance.
package deflectometry

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// The planes that the stage writes. Curvature is ∂slope_x/∂x + ∂slope_y/∂y.
const (
	SlopeXPlane    = "slope_x"   // mrad
	SlopeYPlane    = "slope_y"   // mrad; only with both directions
	CurvaturePlane = "curvature" // mrad/mm, which is 1/m
)

// doubtful is how far from a whole number a fringe order may be.
const doubtful = 0.35

type stage struct{ s Settings }

// Run implements pipeline.Stage.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	frames, err := st.frames(item)
	if err != nil {
		return err
	}
	use, err := st.region(item, frames)
	if err != nil {
		return err
	}
	top := item.Frames[0].Raw.Format.MaxCount()
	inside, saturated := count(use), dropSaturated(use, frames, float32(top))
	per := st.s.Steps * len(st.s.PeriodsMM)
	var slopes [][]float64
	for at := 0; at < len(frames.rows); at += per {
		slopes = append(slopes, st.slope(frames.part(at, at+per), use, top))
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	for _, s := range slopes {
		flatten(s, use, frames.width)
	}
	st.report(item, slopes, use, frames.width, inside, saturated)
	return ctx.Err()
}

// frames returns the view's frames, which must be those that the settings name.
func (st stage) frames(item *pipeline.Item) (sequence, error) {
	if len(item.Frames) != st.s.Frames() {
		return sequence{}, pipeline.Invalid("view %q has %d frames, want %d: %d steps of %d periods, both directions %v", item.View, len(item.Frames), st.s.Frames(), st.s.Steps, len(st.s.PeriodsMM), st.s.BothDirections)
	}
	first := item.Frames[0].Raw
	out := sequence{width: first.Width, height: first.Height}
	for i, f := range item.Frames {
		if err := f.Raw.Check(); err != nil {
			return out, pipeline.Invalid("frame %d: %w", i, err)
		}
		if f.Raw.Width != first.Width || f.Raw.Height != first.Height || f.Raw.Format != first.Format {
			return out, pipeline.Invalid("frame %d is %d × %d px of %v, the first %d × %d of %v", i, f.Raw.Width, f.Raw.Height, f.Raw.Format, first.Width, first.Height, first.Format)
		}
		out.rows = append(out.rows, f.Raw.UnpackRow)
	}
	return out, nil
}

// region returns the pixels to be looked at.
func (st stage) region(item *pipeline.Item, q sequence) ([]bool, error) {
	if item.Region == nil {
		return nil, pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	}
	m := item.Region.Mask()
	if m.Width != q.width || m.Height != q.height {
		return nil, pipeline.Invalid("the region has %d × %d px, the frames %d × %d", m.Width, m.Height, q.width, q.height)
	}
	return slices.Clone(m.Bits), nil
}

// dropSaturated takes the pixels out of use that reach the top in any frame, and counts them.
func dropSaturated(use []bool, q sequence, top float32) int {
	before := count(use)
	inBands(q.height, func(y0, y1 int) {
		row := make([]float32, q.width)
		for y := y0; y < y1; y++ {
			for _, unpack := range q.rows {
				unpack(row, y)
				for x, v := range row {
					use[y*q.width+x] = use[y*q.width+x] && v < top
				}
			}
		}
	})
	return before - count(use)
}

func count(use []bool) int {
	n := 0
	for _, u := range use {
		if u {
			n++
		}
	}
	return n
}

// slope returns the slope in mrad along one direction of the screen, and takes out of use
// the pixels whose fringes are too faint or of doubtful order.
func (st stage) slope(q sequence, use []bool, top int) []float64 {
	linear := linearised(st.s.DisplayGamma, top)
	var phase []float64
	for i, period := range st.s.PeriodsMM {
		f := solve(q.part(i*st.s.Steps, (i+1)*st.s.Steps), linear)
		for k := range use {
			use[k] = use[k] && float64(f.modulation[k]) >= st.s.MinModulationDN
		}
		if i > 0 {
			refine(phase, f.phase, st.s.PeriodsMM[i-1]/period, use)
		}
		phase = f.phase
	}
	finest := st.s.PeriodsMM[len(st.s.PeriodsMM)-1]
	for i, p := range phase {
		phase[i] = 1000 * math.Atan(p*finest/(2*math.Pi)/st.s.DistanceMM) / 2
	}
	return phase
}

// report writes planes, measurements, coverage and defects.
func (st stage) report(item *pipeline.Item, slopes [][]float64, use []bool, width, inside, saturated int) {
	seen := count(use)
	item.Coverage = pipeline.Coverage{SaturatedPx: saturated, MaskedPx: inside - seen}
	if inside > 0 {
		item.Coverage.Share = float64(seen) / float64(inside)
	}
	planes := make([]*raster.Plane, len(slopes))
	for d, name := range []string{SlopeXPlane, SlopeYPlane}[:len(slopes)] {
		p, squares := raster.NewPlane(width, len(use)/width), 0.0
		for i, u := range use {
			if u {
				p.Pix[i] = float32(slopes[d][i])
				squares += slopes[d][i] * slopes[d][i]
			}
		}
		planes[d], slopes[d] = p, nil // large: it can go
		item.SetPlane(name, "mrad", p)
		item.Measure(name+"_rms_mrad", math.Sqrt(squares/max(float64(seen), 1)), "mrad")
	}
	item.SetPlane(CurvaturePlane, "1/m", curvature(planes, use, mmPerPx(item)))
	all := newField(planes, use)
	item.Measure("slope_peak_mrad", float64(slices.Max(all.total)), "mrad")
	if st.s.MaxSlopeMrad > 0 {
		st.proveNoise(item, planes, use)
		st.mark(item, all)
	}
}

// clearOfNoise is how many times the noise of one pixel's slope the threshold must be: half
// the threshold, where a place is outlined, is then passed by noise in
// 1 pixel of 20 at most, and never in many that touch.
const clearOfNoise = 5

// proveNoise holds a view whose slopes are too noisy for the threshold: a dent could hide
// in them.
func (st stage) proveNoise(item *pipeline.Item, slopes []*raster.Plane, use []bool) {
	proof := pipeline.Proof{Name: "slope noise", Value: noiseOf(slopes, use), High: st.s.MaxSlopeMrad / clearOfNoise, Unit: "mrad"}
	if proof.OK = proof.Value <= proof.High; !proof.OK {
		proof.Reason = fmt.Sprintf("the slope of one pixel scatters by %.3g mrad, want at most a %dth of max_slope_mrad (%g): are the fringes bright, in focus and still?", proof.Value, clearOfNoise, st.s.MaxSlopeMrad)
	}
	item.Prove(proof)
}

// noiseOf is the standard deviation of one pixel's slope along one direction, from the
// median difference of neighbours in a row: |N(0, 2σ²)| has the median 0.6745·√2·σ.
func noiseOf(slopes []*raster.Plane, use []bool) float64 {
	worst := 0.0
	every := max(len(use)/enoughForNoise, 1)
	for _, s := range slopes {
		var steps []float64
		for i := 1; i < len(s.Pix); i += every {
			if i%s.Width != 0 && use[i] && use[i-1] {
				steps = append(steps, math.Abs(float64(s.Pix[i]-s.Pix[i-1])))
			}
		}
		if len(steps) == 0 {
			continue
		}
		slices.Sort(steps)
		worst = max(worst, steps[len(steps)/2]/(0.6745*math.Sqrt2))
	}
	return worst
}

// enoughForNoise is about how many pixels say what the noise is.
const enoughForNoise = 500_000

func mmPerPx(item *pipeline.Item) float64 {
	if item.Geometry == nil {
		return 0
	}
	f := item.Frames[0].Raw
	_, _, um := item.Geometry.ToStation(float64(f.Width-1)/2, float64(f.Height-1)/2)
	return um / 1000
}

// curvature is by central differences over pixels in use; 0 elsewhere, and where the view
// has no scale. The screen's x and y are taken to run along the picture's.
func curvature(slopes []*raster.Plane, use []bool, mm float64) *raster.Plane {
	width, height := slopes[0].Width, slopes[0].Height
	out := raster.NewPlane(width, height)
	if mm <= 0 {
		return out
	}
	inBands(height, func(y0, y1 int) {
		for y := max(y0, 1); y < min(y1, height-1); y++ {
			for x := 1; x < width-1; x++ {
				i, sum, whole := y*width+x, 0.0, true
				for d, step := range []int{1, width}[:len(slopes)] {
					whole = whole && use[i-step] && use[i+step]
					sum += float64(slopes[d].Pix[i+step]-slopes[d].Pix[i-step]) / (2 * mm)
				}
				if whole {
					out.Pix[i] = float32(sum)
				}
			}
		}
	})
	return out
}
