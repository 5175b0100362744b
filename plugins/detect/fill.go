package detect

import (
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/fused"
)

// fill writes to the item what the three stages write, but for planes that nobody reads.
func (st *stage) fill(item *pipeline.Item, r *fused.Result) {
	st.mu.Lock()
	item.BadMask = st.bad
	st.mu.Unlock()
	item.Grid, item.SaturatedAt = r.Grid, nil
	width, height := item.Region.Size()
	if len(r.Saturated) > 0 {
		item.SaturatedAt = raster.NewMask(width, height)
		item.SaturatedAt.FillSpans(r.Saturated)
	}
	st.planes(item, r, width, height)
	st.report(item, r)
	item.Truncated = item.Truncated || r.Truncated
	defects := slices.Grow(slices.Clone(item.Defects), len(r.Blobs))
	for _, b := range r.Blobs {
		defects = append(defects, st.blobs.Defect(item, b.Blemish, b.Spans))
	}
	item.Defects = defects
}

func (st *stage) planes(item *pipeline.Item, r *fused.Result, width, height int) {
	if r.SNR != nil {
		item.SetPlane(pipeline.SNRPlane, "sigma", r.SNR)
	}
	if st.needed[pipeline.BackgroundPlane] || st.needed[pipeline.NoisePlane] {
		level, noise := raster.NewPlane(width, height), raster.NewPlane(width, height)
		r.Grid.Interpolate(level, noise)
		item.SetPlane(pipeline.BackgroundPlane, "DN", level)
		item.SetPlane(pipeline.NoisePlane, "DN", noise)
	}
}

// contrast writes the plane of that name.
func (st *stage) contrast(item *pipeline.Item, c *fused.Correction, r *fused.Result, bands int) error {
	p, err := c.Contrast(item.Frames[0].Raw, item.Region.Inside().Spans(), r.Grid, bands)
	if err == nil {
		item.SetPlane(pipeline.ContrastPlane, "sigma", p)
	}
	return err
}

// report sets the coverage, takes the measurements and proves the absolute bounds, as the
// stage darkfield does, from counts by cell in place of pixels.
func (st *stage) report(item *pipeline.Item, r *fused.Result) {
	item.Coverage = cover(item, r)
	var levels, noises []float64
	for i, f := range r.Grid.Filled {
		if !f {
			levels, noises = append(levels, r.Grid.Level[i]), append(noises, r.Grid.Noise[i])
		}
	}
	if len(levels) == 0 {
		return
	}
	slices.Sort(levels)
	slices.Sort(noises)
	n := len(levels)
	item.Coverage.Background, item.Coverage.Noise = levels[n/2], noises[n/2]
	item.Measure("background_dn", levels[n/2], "DN")
	item.Measure("noise_dn", noises[n/2], "DN")
	bound(item, "background", levels[n-1], st.dark.MaxBackgroundDN, "the surface scatters everywhere there: matt, stained or dirty")
	bound(item, "noise", noises[n-1], st.dark.MaxNoiseDN, "grain that rough hides defects")
}

// cover is darkfield.Cover from counts by cell.
func cover(item *pipeline.Item, r *fused.Result) pipeline.Coverage {
	g := r.Grid
	trusted := make([]bool, len(g.Filled))
	inside, seen := 0, 0
	var c pipeline.Coverage
	for i := range trusted {
		trusted[i] = g.Trusted(i)
		inside += g.Inside[i]
		if trusted[i] {
			seen += g.Valid[i]
		}
	}
	c.MaskedPx = inside - seen
	for _, s := range r.Saturated {
		for x := s.X0; x < s.X1; x++ {
			if !item.Region.Inside().At(x, s.Y) {
				continue
			}
			c.SaturatedPx++
			if trusted[s.Y/g.CellPx*g.Columns+x/g.CellPx] && (item.BadMask == nil || !item.BadMask.At(x, s.Y)) {
				seen--
			}
		}
	}
	if inside > 0 {
		c.Share = float64(seen) / float64(inside)
	}
	return c
}

func bound(item *pipeline.Item, name string, value, high float64, why string) {
	if high == 0 {
		return
	}
	p := pipeline.Proof{Name: name, Value: value, High: high, Unit: "DN", OK: value <= high, Low: min(value, 0)}
	if !p.OK {
		p.Reason = fmt.Sprintf("the %s of a cell is %.2f DN, want at most %.2f: %s", name, value, high, why)
	}
	item.Prove(p)
}
