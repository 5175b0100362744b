package region

import (
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// findArea looks for a part of any outline and proves by its area that it is there; without
// it the region is empty.
func (st *stage) findArea(item *pipeline.Item, raw *raster.Plane) {
	part := raster.LitPart(raw, st.s.EdgeLevel)
	x, y := st.centre(raw.Width, raw.Height)
	_, _, scale := st.geometry.ToStation(x, y)
	area := float64(part.Count()) * scale * scale / 1e6
	p := pipeline.Proof{Name: "part", Value: area, Unit: "mm²", Low: st.s.AreaMM2 - st.s.AreaToleranceMM2, High: st.s.AreaMM2 + st.s.AreaToleranceMM2}
	p.OK = area >= p.Low && area <= p.High
	item.Measure("part_area_mm2", area, "mm²")
	if !p.OK {
		p.Reason = fmt.Sprintf("found an area of %.4g mm², want %.4g to %.4g: another part, none, or one that the light does not set off", area, p.Low, p.High)
		item.Prove(p)
		st.leaveEmpty(item, raw)
		return
	}
	item.Prove(p)
	inner := raster.NewMask(raw.Width, raw.Height)
	raster.Erode(inner, part, int(math.Round(st.s.RimMM*1000/scale)))
	found := st.fill(raw.Width, raw.Height, inner.Spans(), float64(inner.Count()), nil)
	item.Region, item.Geometry = found.region, found.geometry
}
