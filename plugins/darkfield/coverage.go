package darkfield

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Cover returns how much of the region was inspected: the pixels in cells whose level
// and noise were seen (Grid.Trusted) that are neither bad nor saturated. bad and
// saturated may be nil. Background and Noise are left 0.
func Cover(region, bad, saturated *raster.Mask, grid *raster.Grid) pipeline.Coverage {
	trusted := make([]bool, len(grid.Filled))
	for i := range trusted {
		trusted[i] = grid.Trusted(i)
	}
	var c pipeline.Coverage
	inside, seen := 0, 0
	for y := range region.Height {
		cells := trusted[y/grid.CellPx*grid.Columns:]
		for x, in := range region.Row(y) {
			if !in {
				continue
			}
			inside++
			masked := !cells[x/grid.CellPx] || bad != nil && bad.At(x, y)
			hot := saturated != nil && saturated.At(x, y)
			if masked {
				c.MaskedPx++
			}
			if hot {
				c.SaturatedPx++
			}
			if !masked && !hot {
				seen++
			}
		}
	}
	if inside > 0 {
		c.Share = float64(seen) / float64(inside)
	}
	return c
}
