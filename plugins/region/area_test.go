package region

import (
	"math"
	"testing"
)

// A disc of 12 mm has π/4·144 = 113.1 mm²; half the part's level lies up to 1 px of 120
// beyond the edge, where surroundings are not black (2 %). Less a rim of 0.5 mm all around about
// π/4·121 = 95.0 mm², of which the square of the erosion takes some.
func TestAreaIsFoundAndProven(t *testing.T) {
	decode := func(tolerance float64) func(any) error {
		return settings(func(s *Settings) {
			s.Shape, s.AreaMM2, s.AreaToleranceMM2, s.RimMM = FoundArea, 113.1, tolerance, 0.5
		})
	}
	item, _ := run(t, part(12, 160, 150), decode(3), nil)
	area, ok := item.Number("part_area_mm2")
	if !ok || math.Abs(area-113.1) > 2.3 || !item.Proofs[0].OK {
		t.Errorf("found %.1f mm², proof %+v", area, item.Proofs[0])
	}
	if zone := item.Region.Zones[0]; zone.AreaMM2 > 97 || zone.AreaMM2 < 85 {
		t.Errorf("the zone has %.1f mm², want about 95.0, less the corners of the erosion", zone.AreaMM2)
	}
	for _, diameter := range []float64{11, 13, 0} {
		item, _ := run(t, part(diameter, 160, 150), decode(3), nil)
		if p := item.Proofs[0]; p.Name != "part" || p.OK || p.Reason == "" || len(item.Region.Zones) != 0 {
			t.Errorf("%g mm: got %+v with %d zones, want no proof and no region", diameter, p, len(item.Region.Zones))
		}
	}
}
