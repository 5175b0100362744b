// Package unwrap is the stage that lays the ring view of a round part out flat, height
// over angle, and measures its defects on that surface. It judges no limits.
package unwrap

import (
	"context"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// The planes that the stage writes, on the flat picture: column for angle, row for
// height, the inner edge on top. The columns beyond one turn repeat the first ones.
const (
	FlatPlane    = "unwrapped"
	FlatSNRPlane = "unwrapped_snr"
)

type stage struct{ s Settings }

// overlapShare of a turn is repeated beyond the seam, so that a defect there is whole
// once: the half, beyond which one over the seam is measured short.
const overlapShare = 2

// Run implements pipeline.Stage. It makes the view's region itself, the ring, and its
// geometry: later stages measure on the part too.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	raw, err := item.Raw()
	if err != nil {
		return err
	}
	a := st.annulus(raw)
	if r := a.OuterPx; a.CentreX-r < -0.5 || a.CentreY-r < -0.5 || a.CentreX+r > float64(raw.Width)-0.5 || a.CentreY+r > float64(raw.Height)-0.5 {
		return pipeline.Invalid("outer_radius_px: the ring of radius %g px about (%g, %g) leaves the frame of %d × %d px", r, a.CentreX, a.CentreY, raw.Width, raw.Height)
	}
	if err := a.Agrees(item.Geometry); err != nil {
		return err
	}
	g := layOut(a, overlapShare)
	flat := g.sample(raw)
	mask := raster.NewMask(flat.Width, flat.Height)
	for i := range mask.Bits {
		mask.Bits[i] = true
	}
	set := raster.DefaultGrid()
	set.CellPx = st.s.GridPx
	cells := raster.MeasureGrid(flat, mask, nil, set)
	if err := ctx.Err(); err != nil {
		return err
	}
	plane := func() *raster.Plane { return raster.NewPlane(flat.Width, flat.Height) }
	level, noise, signal, snr := plane(), plane(), plane(), plane()
	cells.Interpolate(level, noise)
	raster.Subtract(signal, flat, level)
	raster.MatchedFilter(snr, signal, mask)
	raster.SNR(snr, snr, noise)
	st.turn(snr)
	item.SetPlane(FlatPlane, "DN", flat)
	item.SetPlane(FlatSNRPlane, "sigma", snr)
	item.Geometry = a
	item.Region = regionOf(a, raw.Width, raw.Height)
	item.Coverage = coverage(item.Region.Mask().Count(), raw, item, cells)
	st.find(item, g, signal, noise, snr, mask)
	item.Measure("unwrapped_area_mm2", a.AreaMM2(), "mm2")
	return ctx.Err()
}

func (st stage) annulus(raw *raster.Plane) pipeline.Annulus {
	x, y := st.s.CentreXPx, st.s.CentreYPx
	if x == 0 && y == 0 {
		x, y = float64(raw.Width-1)/2, float64(raw.Height-1)/2
	}
	return newAnnulus(st.s, x, y)
}

// turn makes defects of the polarity positive.
func (st stage) turn(snr *raster.Plane) {
	for i, v := range snr.Pix {
		if st.s.Polarity == "dark" || st.s.Polarity == "both" && v < 0 {
			snr.Pix[i] = -v
		}
	}
}

// sample takes the frame's value at each point of the flat picture, bilinearly.
func (g grid) sample(raw *raster.Plane) *raster.Plane {
	out := raster.NewPlane(g.columns+g.overlap, g.rows)
	for row := range out.Height {
		line := out.Row(row)
		for column := range line {
			line[column] = bilinear(raw, float64(column), float64(row), g)
		}
	}
	return out
}

func bilinear(p *raster.Plane, column, row float64, g grid) float32 {
	x, y := g.camera(column, row)
	x, y = min(max(x, 0), float64(p.Width-1)), min(max(y, 0), float64(p.Height-1))
	x0, y0 := int(x), int(y)
	x1, y1 := min(x0+1, p.Width-1), min(y0+1, p.Height-1)
	fx, fy := float32(x-float64(x0)), float32(y-float64(y0))
	top := p.At(x0, y0)*(1-fx) + p.At(x1, y0)*fx
	bottom := p.At(x0, y1)*(1-fx) + p.At(x1, y1)*fx
	return top*(1-fy) + bottom*fy
}

// region is the ring on the frame, with the area that it has on the part.
func regionOf(a pipeline.Annulus, width, height int) *pipeline.Region {
	var spans []raster.Span
	mask := raster.NewMask(width, height)
	for y := range height {
		for x := range width {
			if r := math.Hypot(float64(x)-a.CentreX, float64(y)-a.CentreY); r >= a.InnerPx && r < a.OuterPx {
				mask.Set(x, y, true)
			}
		}
	}
	spans = mask.Spans()
	zone := pipeline.Zone{Name: "ring", Spans: spans, AreaMM2: a.AreaMM2(), EquivalentDiameterMM: 2 * math.Sqrt(a.AreaMM2()/math.Pi)}.
		Edged(pipeline.Outline{CentreX: a.CentreX, CentreY: a.CentreY, InnerPx: a.InnerPx, OuterPx: a.OuterPx})
	return pipeline.NewRegion(width, height, a.CentreX, a.CentreY, a.OuterPx, []pipeline.Zone{zone})
}

// coverage counts the share of cells of the flat picture whose level and noise were
// seen, and the ring's saturated pixels.
func coverage(pixels int, raw *raster.Plane, item *pipeline.Item, cells *raster.Grid) pipeline.Coverage {
	seen, inside := 0, 0
	for i := range cells.Filled {
		inside += cells.Inside[i]
		if cells.Trusted(i) {
			seen += cells.Valid[i]
		}
	}
	c := pipeline.Coverage{}
	top := float32(item.Frames[0].Raw.Format.MaxCount())
	for i, in := range item.Region.Mask().Bits {
		if in && raw.At(i%raw.Width, i/raw.Width) >= top {
			c.SaturatedPx++
		}
	}
	if inside > 0 && pixels > 0 {
		c.Share = min(float64(seen)/float64(inside), 1-float64(c.SaturatedPx)/float64(pixels))
	}
	return c
}
