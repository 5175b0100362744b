package coverage

import (
	"context"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "coverage", Version: "2", Scope: pipeline.ScopeView,
	Summary: "Says cell by cell what would have been found, and how much of the region was inspected for what the limits forbid.",
	Reads:   []string{pipeline.RawPlane, "grid", "region", "geometry", "bad pixels", "saturated pixels", "proofs"},
	Writes:  []string{"coverage", "coverage map", "measurements"},
}, Default, build)

type stage struct {
	s           Settings
	calibration *pipeline.Calibration
}

func build(s Settings, env pipeline.Environment) (pipeline.Stage, error) {
	if s.SmallestDigUM > 0 && s.DigContrastDN == 0 && (env.Calibration == nil || env.Calibration.Sizing == nil) {
		return nil, pipeline.Invalid("dig_contrast_dn: not given and the calibration has no sizing curve; want the contrast of the faintest dig that the limits forbid")
	}
	return stage{s, env.Calibration}, nil
}

// Run implements pipeline.Stage.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	g := item.Grid
	switch {
	case g == nil:
		return pipeline.Invalid("view %q has no grid of level and noise; put the stage darkfield earlier in the recipe", item.View)
	case item.Region == nil || item.Geometry == nil:
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	case g.Columns != (item.Region.Mask().Width+g.CellPx-1)/g.CellPx || g.Rows != (item.Region.Mask().Height+g.CellPx-1)/g.CellPx:
		return pipeline.Invalid("the grid of %d × %d cells does not fit a region of %d × %d px", g.Columns, g.Rows, item.Region.Mask().Width, item.Region.Mask().Height)
	}
	m := &pipeline.CoverageMap{CellPx: g.CellPx, Columns: g.Columns, Rows: g.Rows}
	_, _, scale := item.Geometry.ToStation(item.Region.CentreX, item.Region.CentreY)
	o := opticsOf(st.s, st.calibration, scale)
	light := lightOf(item)
	if st.s.SmallestDigUM > 0 {
		m.DigLimitUM = st.limit(st.s.SmallestDigUM)
		m.DigUM = cells(g, func(noise float64) (float64, bool) { return st.dig(o, light, noise) })
	}
	if st.s.ScratchWidthUM > 0 {
		m.ScratchLimitUM = st.limit(st.s.ScratchWidthUM)
		m.ScratchUM = cells(g, func(noise float64) (float64, bool) {
			return o.scratchUM(light*st.s.ScratchContrastDN, st.s.KHigh, noise)
		})
	}
	dead, err := deadCells(item, g)
	if err != nil {
		return err
	}
	for i, is := range dead {
		for _, found := range [][]int{m.DigUM, m.ScratchUM} {
			if is && i < len(found) && found[i] != 0 {
				found[i] = -1
			}
		}
	}
	st.count(item, g, m, dead)
	item.CoverageMap = m
	measure(item, "smallest_dig_um", m.DigUM)
	measure(item, "faintest_scratch_um", m.ScratchUM)
	return ctx.Err()
}

func (st stage) dig(o optics, light, noise float64) (float64, bool) {
	if st.s.DigContrastDN > 0 {
		return o.discUM(light*st.s.DigContrastDN, st.s.KHigh, noise)
	}
	return o.onCurveUM(*st.calibration.Sizing, light, st.s.KHigh, noise)
}

// lightOf is the light that was proven, at most the calibrated one.
func lightOf(item *pipeline.Item) float64 {
	for _, p := range item.Proofs {
		if p.Name == pipeline.ProofLight && p.High > 0 {
			return min(max(p.Value, 0), 1)
		}
	}
	return 1
}

// cells returns what smallest says of each cell's noise, rounded up to whole µm.
func cells(g *raster.Grid, smallest func(noise float64) (float64, bool)) []int {
	out := make([]int, len(g.Level))
	for i := range out {
		if g.Inside[i] == 0 {
			continue
		}
		out[i] = -1
		if um, ok := smallest(g.Noise[i]); ok && g.Trusted(i) && um < math.MaxInt32 {
			out[i] = int(math.Ceil(um))
		}
	}
	return out
}

// count fills in the shares and sets the view's coverage. A pixel that is not inspected
// for several causes counts for the first of: unseen, saturated, noisy.
func (st stage) count(item *pipeline.Item, g *raster.Grid, m *pipeline.CoverageMap, dead []bool) {
	blind := make([]bool, len(g.Level))
	for i := range blind {
		blind[i] = !m.Inspected(i)
	}
	trusted := make([]bool, len(g.Level))
	for i := range trusted {
		trusted[i] = g.Trusted(i) && !dead[i]
	}
	region := item.Region.Mask()
	inside, seen, unseen, saturated, noisy := 0, 0, 0, 0, 0
	for y := range region.Height {
		base := y / g.CellPx * g.Columns
		for x, in := range region.Row(y) {
			if !in {
				continue
			}
			inside++
			switch i := base + x/g.CellPx; {
			case !trusted[i] || item.BadMask != nil && item.BadMask.At(x, y):
				unseen++
			case item.SaturatedAt != nil && item.SaturatedAt.At(x, y):
				saturated++
			case blind[i]:
				noisy++
			default:
				seen++
			}
		}
	}
	item.Coverage.Share = 0
	if n := float64(inside); inside > 0 {
		item.Coverage.Share = float64(seen) / n
		m.UnseenShare, m.SaturatedShare, m.NoisyShare = float64(unseen)/n, float64(saturated)/n, float64(noisy)/n
	}
}

// deadBlockPx is the side of the blocks that a living sensor does not fill with one value.
const deadBlockPx = 16

// deadCells reports for each cell whether rows or blocks of it are of one value or repeated
// in a frame: they were not transferred, however quiet they look.
func deadCells(item *pipeline.Item, g *raster.Grid) ([]bool, error) {
	out := make([]bool, len(g.Level))
	for k, f := range item.Frames {
		p, err := planeOf(item, k)
		if err != nil {
			return nil, err
		}
		for y, dead := range raster.DeadRows(p) {
			for column := 0; dead && column < g.Columns; column++ {
				out[y/g.CellPx*g.Columns+column] = true
			}
		}
		top := float32(f.Raw.Format.MaxCount())
		for y := 0; y+deadBlockPx <= p.Height; y += deadBlockPx {
			for x := 0; x+deadBlockPx <= p.Width; x += deadBlockPx {
				if raster.DeadBlock(p, x, y, deadBlockPx, top) {
					last := deadBlockPx - 1
					for _, at := range [][2]int{{x, y}, {x + last, y}, {x, y + last}, {x + last, y + last}} {
						out[at[1]/g.CellPx*g.Columns+at[0]/g.CellPx] = true
					}
				}
			}
		}
	}
	return out, nil
}

func planeOf(item *pipeline.Item, k int) (*raster.Plane, error) {
	if k == 0 {
		return item.Raw()
	}
	return item.Frames[k].Raw.Plane()
}

// limit is the most that may be found every second time for the forbidden to be found.
func (st stage) limit(forbiddenUM float64) int { return int(math.Ceil(forbiddenUM / st.s.Margin)) }

// measure notes what is found in the middle one of the region's cells.
func measure(item *pipeline.Item, name string, found []int) {
	var inside []int
	for _, v := range found {
		if v > 0 {
			inside = append(inside, v)
		}
	}
	if len(inside) > 0 {
		slices.Sort(inside)
		item.Measure(name, float64(inside[len(inside)/2]), "um")
	}
}
