package outside

import (
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// place checks region and geometry.
func (a *checker) place() error {
	region, err := stagepb.ToRegion(a.res.GetRegion())
	if err != nil {
		return err
	}
	if region != nil {
		if err := a.region(region); err != nil {
			return err
		}
		lendEdges(region, a.res.GetRegion().GetZones())
		a.m.region = region
	}
	if g := stagepb.ToGeometry(a.res.GetGeometry()); g != nil {
		if err := a.geometry(g); err != nil {
			return err
		}
		a.m.geometry = g
	}
	return nil
}

// region refuses one that is smaller than before, or tiny: less surface to inspect is
// how a bad part would pass. A stage that finds no part fails a proof beside it.
func (a *checker) region(r *pipeline.Region) error {
	mask := r.Mask()
	if err := a.sized("region", mask.Width, mask.Height); err != nil {
		return err
	}
	if !finite(r.CentreX, r.CentreY, r.RadiusPx) || r.RadiusPx < 0 {
		return fmt.Errorf("region: centre (%g, %g), radius %g px, want finite numbers", r.CentreX, r.CentreY, r.RadiusPx)
	}
	for _, z := range r.Zones {
		if z.Name == "" || len(z.Name) > maxWord || !finite(z.AreaMM2, z.EquivalentDiameterMM) || z.AreaMM2 < 0 || z.EquivalentDiameterMM < 0 {
			return fmt.Errorf("region: zone %q of %g mm², diameter %g mm, want a name and finite numbers", shorten(z.Name), z.AreaMM2, z.EquivalentDiameterMM)
		}
		if err := outlined(z); err != nil {
			return fmt.Errorf("region: zone %q: %w", shorten(z.Name), err)
		}
	}
	if a.failing() {
		return nil
	}
	pixels := mask.Count()
	if least := a.minRegionShare * float64(len(mask.Bits)); float64(pixels) < least {
		return fmt.Errorf("region: it has %d px, want at least %.0f (min_region_share %g of the frame)", pixels, least, a.minRegionShare)
	}
	if a.item.Region == nil {
		return nil
	}
	if kept, all := overlap(a.item.Region.Mask(), mask); kept < all {
		return fmt.Errorf("region: %d of the %d px that were to be inspected before are not in it; a stage outside may only add to a region", all-kept, all)
	}
	return nil
}

// scaleTolerance is how much a stage may change the scale at the middle of a view: a
// smaller scale would make every defect smaller.
const scaleTolerance = 0.01

func (a *checker) geometry(g pipeline.Geometry) error {
	if ring, ok := g.(pipeline.Annulus); ok {
		err := ring.Check()
		if err == nil {
			err = ring.Agrees(a.item.Geometry)
		}
		if err != nil {
			return fmt.Errorf("geometry: %w", err)
		}
		return nil
	}
	w, h := a.size()
	x, y := float64(w-1)/2, float64(h-1)/2
	if d, ok := g.(pipeline.Distorted); ok {
		if err := d.Lens.Check(math.Hypot(x, y)); err != nil {
			return fmt.Errorf("geometry: %w", err)
		}
	}
	u, v, scale := g.ToStation(x, y)
	if !finite(u, v, scale) || scale <= 0 {
		return fmt.Errorf("geometry: the middle of the view is at (%g, %g) µm with %g µm/px, want finite numbers and a scale above 0", u, v, scale)
	}
	if a.item.Geometry == nil {
		return nil
	}
	_, _, before := a.item.Geometry.ToStation(x, y)
	if math.Abs(scale-before) > scaleTolerance*before {
		return fmt.Errorf("geometry: the scale is %g µm/px, before it was %g; want a change of at most %g %%", scale, before, 100*scaleTolerance)
	}
	return nil
}

// coverage may fall, and can hold nothing that the region and its own counts rule out.
func (a *checker) coverage() error {
	if a.res.GetCoverage() == nil {
		return nil
	}
	c := stagepb.ToCoverage(a.res.GetCoverage())
	region := a.item.Region
	if a.m.region != nil {
		region = a.m.region
	}
	pixels := 0
	if region != nil {
		pixels = region.Mask().Count()
	}
	switch {
	case !finite(c.Share, c.Background, c.Noise) || c.Share < 0 || c.Share > 1:
		return fmt.Errorf("coverage: share %g, background %g, noise %g, want finite numbers and a share of 0 to 1", c.Share, c.Background, c.Noise)
	case c.SaturatedPx < 0 || c.MaskedPx < 0 || c.SaturatedPx > pixels || c.MaskedPx > pixels:
		return fmt.Errorf("coverage: %d saturated and %d masked px in a region of %d", c.SaturatedPx, c.MaskedPx, pixels)
	case pixels == 0 && c.Share > 0:
		return fmt.Errorf("coverage: a share of %g where there is no region", c.Share)
	case pixels > 0 && c.Share > 1-float64(max(c.SaturatedPx, c.MaskedPx))/float64(pixels)+1e-9:
		return fmt.Errorf("coverage: a share of %g, but %d masked and %d saturated of %d px", c.Share, c.MaskedPx, c.SaturatedPx, pixels)
	case a.item.Coverage != pipeline.Coverage{} && c.Share > a.item.Coverage.Share:
		return fmt.Errorf("coverage: the share rose from %g to %g; a stage outside may only lower it", a.item.Coverage.Share, c.Share)
	}
	a.m.coverage = &c
	return nil
}

// cells checks the grid and the map of what would have been found.
func (a *checker) cells() (err error) {
	if a.m.grid, err = stagepb.ToGrid(a.res.GetGrid()); err != nil {
		return err
	}
	if g := a.m.grid; g != nil {
		w, h := a.size()
		if w > 0 && (g.Columns != (w+g.CellPx-1)/g.CellPx || g.Rows != (h+g.CellPx-1)/g.CellPx) {
			return fmt.Errorf("grid: got %d × %d cells of %d px, they do not fit the frame of %d × %d px", g.Columns, g.Rows, g.CellPx, w, h)
		}
		for i := range g.Level {
			if !finite(g.Level[i], g.Noise[i]) || g.Noise[i] < 0 || g.Inside[i] < 0 || g.Valid[i] < 0 {
				return fmt.Errorf("grid: cell %d has level %g, noise %g, %d and %d px; want finite numbers and none below 0", i, g.Level[i], g.Noise[i], g.Inside[i], g.Valid[i])
			}
		}
	}
	if a.m.coverageMap, err = stagepb.ToCoverageMap(a.res.GetCoverageMap()); err != nil || a.m.coverageMap == nil {
		return err
	}
	m := a.m.coverageMap
	if s := []float64{m.NoisyShare, m.UnseenShare, m.SaturatedShare}; !finite(s...) || slices.Min(s) < 0 || slices.Max(s) > 1 {
		return fmt.Errorf("coverage map: shares %v, want 0 to 1", s)
	}
	return nil
}
