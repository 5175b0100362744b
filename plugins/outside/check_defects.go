package outside

import (
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

const maxPath = 20_000

// defects checks each defect, fills in what the host knows better, and refuses a list in
// which one that was known has vanished.
func (a *checker) defects() error {
	list := a.res.GetDefects()
	if len(list) > pipeline.MaxDefects {
		if a.res.GetReplaceDefects() {
			return fmt.Errorf("it replaced the defects by %d, want at most %d", len(list), pipeline.MaxDefects)
		}
		list, a.m.truncated = list[:pipeline.MaxDefects], true
	}
	defects, err := stagepb.ToDefects(list)
	if err != nil {
		return err
	}
	for i := range defects {
		if err := a.defect(&defects[i]); err != nil {
			return fmt.Errorf("defects[%d]: %w", i, err)
		}
	}
	a.m.defects, a.m.replace = defects, a.res.GetReplaceDefects()
	if !a.m.replace {
		return nil
	}
	for _, was := range a.item.Defects {
		if !slices.ContainsFunc(defects, func(is pipeline.Defect) bool { return a.standsFor(is, was) }) {
			return fmt.Errorf("the %s at (%.1f, %.1f) px has vanished from the list; a stage outside may not take defects away", was.Kind, was.XPx, was.YPx)
		}
	}
	return nil
}

// standsFor reports whether a defect is, or was merged from, one that was known.
func (a *checker) standsFor(is, was pipeline.Defect) bool {
	if a.unit() {
		return is.View == was.View && is.ID == was.ID || slices.Contains(is.MergedFrom, pipeline.Ref{View: was.View, ID: was.ID})
	}
	const margin = 1
	return was.XPx >= float64(is.Box.X0)-margin && was.XPx <= float64(is.Box.X1)+margin &&
		was.YPx >= float64(is.Box.Y0)-margin && was.YPx <= float64(is.Box.Y1)+margin
}

func (a *checker) unit() bool { return a.described.GetScope() == stagepb.Scope_SCOPE_UNIT }

func (a *checker) defect(d *pipeline.Defect) error {
	sizes := []float64{d.AreaUM2, d.LengthUM, d.WidthUM, d.DiameterUM, d.LengthPx, d.WidthPx, d.DiameterPx, float64(d.AreaPx), d.DiameterFluxUM, d.DiameterFluxUncertaintyUM, d.SlopeMrad}
	if !finite(sizes...) || !finite(d.XPx, d.YPx, d.UUM, d.VUM, d.PartUUM, d.PartVUM, d.AngleDeg, d.Flux, d.PeakDN, d.PeakSigma, d.SNR, d.EdgeDistanceUM) {
		return fmt.Errorf("a measure is no number")
	}
	if slices.Min(sizes) < 0 || slices.Max(sizes) == 0 {
		return fmt.Errorf("its sizes are %v, want none below 0 and one above", sizes)
	}
	if !slices.Contains(pipeline.Kinds(), d.Kind) {
		return fmt.Errorf("kind %q, want one of %q", shorten(string(d.Kind)), pipeline.Kinds())
	}
	if len(d.Path) > maxPath || len(d.SeenIn) > maxWord || len(d.MergedFrom) > pipeline.MaxDefects {
		return fmt.Errorf("%d points, seen in %d views, merged from %d: too many", len(d.Path), len(d.SeenIn), len(d.MergedFrom))
	}
	for _, p := range d.Path {
		if !finite(p.X, p.Y) {
			return fmt.Errorf("a point of its path is no number")
		}
	}
	if a.unit() {
		return nil
	}
	return a.inView(d)
}

// inView checks that a defect lies in the frame and in a zone there is, and gives it
// place and sizes on the part where the stage did not.
func (a *checker) inView(d *pipeline.Defect) error {
	w, h := a.size()
	if w > 0 && (d.XPx < -1 || d.YPx < -1 || d.XPx > float64(w) || d.YPx > float64(h)) {
		return fmt.Errorf("it lies at (%.1f, %.1f) px, outside of the frame of %d × %d px", d.XPx, d.YPx, w, h)
	}
	if b := d.Box; w > 0 && (b.X0 < 0 || b.Y0 < 0 || b.X1 > w || b.Y1 > h || b.X0 > b.X1 || b.Y0 > b.Y1) {
		return fmt.Errorf("its box is %+v, want one in the frame of %d × %d px", b, w, h)
	}
	d.View = a.item.View
	scale := a.onPart(d)
	region := a.item.Region
	if a.m.region != nil {
		region = a.m.region
	}
	if region == nil {
		return nil
	}
	zone, _ := region.ZoneAt(d.XPx, d.YPx)
	if d.Zone != "" {
		i := slices.IndexFunc(region.Zones, func(z pipeline.Zone) bool { return z.Name == d.Zone })
		if i < 0 {
			return fmt.Errorf("it names the zone %q, which the region does not have", shorten(d.Zone))
		}
		zone = region.Zones[i]
	}
	d.Zone = zone.Name
	if d.EdgeDistanceUM == 0 && zone.EdgeDistancePx != nil {
		d.EdgeDistanceUM = zone.EdgeDistancePx(d.XPx, d.YPx) * scale
	}
	return nil
}

// onPart fills in place and sizes in µm and returns the local scale.
func (a *checker) onPart(d *pipeline.Defect) float64 {
	g := a.item.Geometry
	if a.m.geometry != nil {
		g = a.m.geometry
	}
	if g == nil {
		return 0
	}
	u, v, scale := g.ToStation(d.XPx, d.YPx)
	if d.UUM == 0 && d.VUM == 0 {
		d.UUM, d.VUM = u, v
	}
	for _, s := range []struct {
		um *float64
		px float64
	}{{&d.LengthUM, d.LengthPx}, {&d.WidthUM, d.WidthPx}, {&d.DiameterUM, d.DiameterPx}, {&d.AreaUM2, float64(d.AreaPx) * scale}} {
		if *s.um == 0 {
			*s.um = s.px * scale
		}
	}
	return scale
}
