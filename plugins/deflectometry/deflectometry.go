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
	use, err := st.region(item, frames[0])
	if err != nil {
		return err
	}
	inside, saturated := count(use), st.dropSaturated(use, item, frames)
	per := st.s.Steps * len(st.s.PeriodsMM)
	var slopes [][]float64
	for at := 0; at < len(frames); at += per {
		slopes = append(slopes, st.slope(frames[at:at+per], use, float64(item.Frames[0].Raw.Format.MaxCount())))
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	for _, s := range slopes {
		flatten(s, use, frames[0].Width)
	}
	st.report(item, slopes, use, frames[0].Width, inside, saturated)
	return ctx.Err()
}

// frames unpacks the view's frames, which must be those that the settings name.
func (st stage) frames(item *pipeline.Item) ([]*raster.Plane, error) {
	if len(item.Frames) != st.s.Frames() {
		return nil, pipeline.Invalid("view %q has %d frames, want %d: %d steps of %d periods, both directions %v", item.View, len(item.Frames), st.s.Frames(), st.s.Steps, len(st.s.PeriodsMM), st.s.BothDirections)
	}
	var out []*raster.Plane
	for i, f := range item.Frames {
		p, err := f.Raw.Plane()
		if err != nil {
			return nil, err
		}
		if i > 0 && !p.SameSize(out[0]) {
			return nil, pipeline.Invalid("frame %d has %d × %d px, the first %d × %d", i, p.Width, p.Height, out[0].Width, out[0].Height)
		}
		out = append(out, p)
	}
	return out, nil
}

// region returns the pixels to be looked at.
func (st stage) region(item *pipeline.Item, p *raster.Plane) ([]bool, error) {
	if item.Region == nil {
		return nil, pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	}
	m := item.Region.Mask()
	if m.Width != p.Width || m.Height != p.Height {
		return nil, pipeline.Invalid("the region has %d × %d px, the frames %d × %d", m.Width, m.Height, p.Width, p.Height)
	}
	return slices.Clone(m.Bits), nil
}

func (st stage) dropSaturated(use []bool, item *pipeline.Item, frames []*raster.Plane) int {
	top, n := float32(item.Frames[0].Raw.Format.MaxCount()), 0
	for i := range use {
		if use[i] && slices.ContainsFunc(frames, func(f *raster.Plane) bool { return f.Pix[i] >= top }) {
			use[i] = false
			n++
		}
	}
	return n
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
func (st stage) slope(frames []*raster.Plane, use []bool, top float64) []float64 {
	linear := linearised(st.s.DisplayGamma, top)
	var phase []float64
	for i, period := range st.s.PeriodsMM {
		f := solve(frames[i*st.s.Steps:(i+1)*st.s.Steps], linear)
		var doubt []float64
		if i == 0 {
			phase, doubt = f.phase, make([]float64, len(f.phase))
		} else {
			phase, doubt = refine(phase, f.phase, st.s.PeriodsMM[i-1]/period)
		}
		for k := range use {
			use[k] = use[k] && f.modulation[k] >= st.s.MinModulationDN && doubt[k] <= doubtful
		}
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
	for d, name := range []string{SlopeXPlane, SlopeYPlane}[:len(slopes)] {
		p, squares := raster.NewPlane(width, len(use)/width), 0.0
		for i, u := range use {
			if !u {
				slopes[d][i] = 0
				continue
			}
			p.Pix[i] = float32(slopes[d][i])
			squares += slopes[d][i] * slopes[d][i]
		}
		item.SetPlane(name, "mrad", p)
		item.Measure(name+"_rms_mrad", math.Sqrt(squares/max(float64(seen), 1)), "mrad")
	}
	item.SetPlane(CurvaturePlane, "1/m", curvature(slopes, use, width, mmPerPx(item)))
	all := newField(slopes, use, width)
	item.Measure("slope_peak_mrad", slices.Max(all.total), "mrad")
	if st.s.MaxSlopeMrad > 0 {
		st.proveNoise(item, slopes, use, width)
		st.mark(item, all)
	}
}

// clearOfNoise is how many times the noise of one pixel's slope the threshold must be: half
// the threshold, where a place is outlined, is then passed by noise in
// 1 pixel of 20 at most, and never in many that touch.
const clearOfNoise = 5

// proveNoise holds a view whose slopes are too noisy for the threshold: a dent could hide
// in them.
func (st stage) proveNoise(item *pipeline.Item, slopes [][]float64, use []bool, width int) {
	proof := pipeline.Proof{Name: "slope noise", Value: noiseOf(slopes, use, width), High: st.s.MaxSlopeMrad / clearOfNoise, Unit: "mrad"}
	if proof.OK = proof.Value <= proof.High; !proof.OK {
		proof.Reason = fmt.Sprintf("the slope of one pixel scatters by %.3g mrad, want at most a %dth of max_slope_mrad (%g): are the fringes bright, in focus and still?", proof.Value, clearOfNoise, st.s.MaxSlopeMrad)
	}
	item.Prove(proof)
}

// noiseOf is the standard deviation of one pixel's slope along one direction, from the
// median difference of neighbours in a row: |N(0, 2σ²)| has the median 0.6745·√2·σ.
func noiseOf(slopes [][]float64, use []bool, width int) float64 {
	worst := 0.0
	for _, s := range slopes {
		var steps []float64
		for i := 1; i < len(s); i++ {
			if i%width != 0 && use[i] && use[i-1] {
				steps = append(steps, math.Abs(s[i]-s[i-1]))
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
func curvature(slopes [][]float64, use []bool, width int, mm float64) *raster.Plane {
	height := len(use) / width
	out := raster.NewPlane(width, height)
	if mm <= 0 {
		return out
	}
	for y := 1; y < height-1; y++ {
		for x := 1; x < width-1; x++ {
			i, sum, whole := y*width+x, 0.0, true
			for d, step := range []int{1, width}[:len(slopes)] {
				whole = whole && use[i-step] && use[i+step]
				sum += (slopes[d][i+step] - slopes[d][i-step]) / (2 * mm)
			}
			if whole {
				out.Pix[i] = float32(sum)
			}
		}
	}
	return out
}
