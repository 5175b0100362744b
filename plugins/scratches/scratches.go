package scratches

import (
	"context"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/lines"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "scratches", Version: "1", Scope: pipeline.ScopeView,
	Summary: "Finds scratches too faint for any of their pixels to stand out, by sums along all lines.",
	Reads:   []string{pipeline.ContrastPlane, "region", "geometry", "grid", "bad pixels", "saturated pixels", "defects"},
	Writes:  []string{"defects", "measurements"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) {
	return &stage{s: s, finder: &lines.Finder{}}, nil
})

type stage struct {
	s      Settings
	finder *lines.Finder
}

// Run implements pipeline.Stage. Scratches are added to the defects already there; pieces
// of a scratch among these give way to it.
func (st *stage) Run(ctx context.Context, item *pipeline.Item) error {
	contrast, err := item.Plane(pipeline.ContrastPlane)
	if err != nil {
		return err
	}
	if err := check(item, contrast); err != nil {
		return err
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	s := st.s.lines()
	if item.Region.RadiusPx > 0 {
		s.Centre = &raster.Point{X: item.Region.CentreX, Y: item.Region.CentreY}
	}
	found, err := st.finder.Find(contrast, item.Region.Inside(), spots(item), s)
	if err != nil {
		return &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	}
	measureLay(item, found.Lay)
	st.add(item, found)
	return ctx.Err()
}

func check(item *pipeline.Item, p *raster.Plane) error {
	switch {
	case item.Region == nil:
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	case item.Geometry == nil:
		return pipeline.Invalid("view %q has no geometry", item.View)
	case item.Grid == nil:
		return pipeline.Invalid("view %q has no grid of level and noise; put the stage darkfield earlier in the recipe", item.View)
	}
	if width, height := item.Region.Size(); width != p.Width || height != p.Height {
		return pipeline.Invalid("region: got %d × %d px, the contrast plane has %d × %d", width, height, p.Width, p.Height)
	}
	if m := item.BadMask; m != nil && (m.Width != p.Width || m.Height != p.Height) {
		return pipeline.Invalid("bad pixels: got %d × %d px, the contrast plane has %d × %d", m.Width, m.Height, p.Width, p.Height)
	}
	return nil
}

// Spots are defects that are no part of a line: they are left out of the search. A larger
// one may be a stain with scratches in it.
const (
	leastSpotPx = 8
	mostSpotPx  = 128
	mostSpot    = 2.5 // length over width
)

// spots returns the pixels that do not count: the bad ones, and those of compact defects.
func spots(item *pipeline.Item) *raster.Mask {
	var m *raster.Mask
	for _, d := range item.Defects {
		w, h := d.Box.X1-d.Box.X0, d.Box.Y1-d.Box.Y0
		if d.Kind == pipeline.Scratch || min(w, h) < leastSpotPx || max(w, h) > mostSpotPx || d.Elongation() > mostSpot {
			continue
		}
		if m == nil {
			m = withBad(item)
		}
		for y := max(d.Box.Y0, 0); y < min(d.Box.Y1, m.Height); y++ {
			for x := max(d.Box.X0, 0); x < min(d.Box.X1, m.Width); x++ {
				m.Set(x, y, true)
			}
		}
	}
	if m == nil {
		return item.BadMask
	}
	return m
}

func withBad(item *pipeline.Item) *raster.Mask {
	m := raster.NewMask(item.Region.Size())
	if item.BadMask != nil {
		copy(m.Bits, item.BadMask.Bits)
	}
	return m
}

func measureLay(item *pipeline.Item, l lines.Lay) {
	if l.Kind == lines.NoLay {
		return
	}
	item.Measure("lay_contrast", l.Contrast, "sigma")
	item.Measure("lay_period_px", l.Period, "px")
	if l.Kind == lines.Straight {
		item.Measure("lay_angle_deg", l.Angle, "°")
	}
}
