// Package darkfield is the stage that turns a corrected picture into contrast in units
// of its own noise, and says how much of the region could be inspected. It names no
// defect.
package darkfield

import (
	"context"
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "darkfield", Version: "1", Scope: pipeline.ScopeView,
	Summary: "Measures local level and noise, and writes the matched-filter contrast in units of its own sigma.",
	Reads:   []string{pipeline.CorrectedPlane, "region", "bad pixels", "saturated pixels"},
	Writes:  []string{pipeline.BackgroundPlane, pipeline.NoisePlane, pipeline.SNRPlane, pipeline.ContrastPlane, "coverage", "grid"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// Run implements pipeline.Stage.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	corrected, err := item.Plane(pipeline.CorrectedPlane)
	if err != nil {
		return err
	}
	if item.Region == nil {
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	}
	mask := item.Region.Mask()
	if mask.Width != corrected.Width || mask.Height != corrected.Height {
		return pipeline.Invalid("region: got %d × %d px, the picture has %d × %d", mask.Width, mask.Height, corrected.Width, corrected.Height)
	}
	grid := raster.MeasureGrid(corrected, mask, item.BadMask, st.s.Grid())
	if err := ctx.Err(); err != nil {
		return err
	}
	item.Grid = grid
	st.contrast(item, corrected, mask, grid)
	st.report(item, grid)
	return ctx.Err()
}

// Grid returns how level and noise are measured.
func (s Settings) Grid() raster.GridSettings {
	g := raster.DefaultGrid()
	g.CellPx = s.GridPx
	return g
}

func (st stage) contrast(item *pipeline.Item, corrected *raster.Plane, mask *raster.Mask, grid *raster.Grid) {
	plane := func() *raster.Plane { return raster.NewPlane(corrected.Width, corrected.Height) }
	level, noise, signal, snr := plane(), plane(), plane(), plane()
	grid.Interpolate(level, noise)
	raster.Subtract(signal, corrected, level)
	raster.MatchedFilter(snr, signal, mask)
	raster.SNR(snr, snr, noise)
	st.turn(snr)
	item.SetPlane(pipeline.BackgroundPlane, "DN", level)
	item.SetPlane(pipeline.NoisePlane, "DN", noise)
	item.SetPlane(pipeline.SNRPlane, "sigma", snr)
	raster.Ratio(signal, signal, noise, mask)
	if item.BadMask != nil {
		for i, bad := range item.BadMask.Bits {
			if bad {
				signal.Pix[i] = 0
			}
		}
	}
	item.SetPlane(pipeline.ContrastPlane, "sigma", signal)
}

// turn makes defects of the polarity positive.
func (st stage) turn(snr *raster.Plane) {
	if st.s.Polarity == Bright {
		return
	}
	for i, v := range snr.Pix {
		if st.s.Polarity == Dark || v < 0 {
			snr.Pix[i] = -v
		}
	}
}

// report sets the coverage, takes the measurements and proves the absolute bounds.
func (st stage) report(item *pipeline.Item, grid *raster.Grid) {
	var levels, noises []float64
	for i, f := range grid.Filled {
		if !f {
			levels, noises = append(levels, grid.Level[i]), append(noises, grid.Noise[i])
		}
	}
	item.Coverage = Cover(item.Region.Mask(), item.BadMask, item.SaturatedAt, grid)
	if len(levels) == 0 {
		return
	}
	slices.Sort(levels)
	slices.Sort(noises)
	n := len(levels)
	item.Coverage.Background, item.Coverage.Noise = levels[n/2], noises[n/2]
	item.Measure("background_dn", levels[n/2], "DN")
	item.Measure("noise_dn", noises[n/2], "DN")
	bound(item, "background", levels[n-1], st.s.MaxBackgroundDN, "the surface scatters everywhere there: matt, stained or dirty")
	bound(item, "noise", noises[n-1], st.s.MaxNoiseDN, "grain that rough hides defects")
}

// bound proves that the highest cell does not pass an absolute bound.
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
