package alarm

import (
	"math"
	"slices"
	"strings"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// sight is where one showing of a unit had defects in one view.
type sight struct {
	inspection int64
	unit       string // with its part, lot and surface
	id         string // the unit's own
	points     []pipeline.Point
	centre     pipeline.Point // of what was inspected
	radius     float64        // px; 0 = the whole frame
}

// sightOf returns what a showing says of a view; ok is false where it says nothing.
func sightOf(in ledger.Inspection, v pipeline.ViewEvidence) (s sight, ok bool) {
	bad := func(p pipeline.Proof) bool { return !p.OK }
	failed := func(f pipeline.Failure) bool { return f.View == v.Name && f.Reason != pipeline.ReasonDirt }
	if slices.ContainsFunc(v.Proofs, bad) || slices.ContainsFunc(in.Evidence.Failures, failed) || len(v.Region.Zones) == 0 || v.Truncated {
		return s, false
	}
	s = sight{inspection: in.ID, unit: strings.Join([]string{in.Part, in.Lot, in.Unit, in.Surface}, "/"), id: in.Unit,
		centre: pipeline.Point{X: v.Region.CentreX, Y: v.Region.CentreY}, radius: inspectedRadius(v)}
	for _, d := range v.Defects {
		s.points = append(s.points, pipeline.Point{X: d.XPx, Y: d.YPx})
	}
	return s, true
}

// inspectedRadius is that of the largest zone, or of the part, in px; 0 where none is round.
func inspectedRadius(v pipeline.ViewEvidence) float64 {
	most := 0.
	for _, z := range v.Region.Zones {
		if v.UMPerPx > 0 {
			most = max(most, 500*z.OuterDiameterMM/v.UMPerPx)
		}
	}
	if most == 0 {
		return v.Region.RadiusPx
	}
	return most
}

func distance(a, b pipeline.Point) float64 { return math.Hypot(a.X-b.X, a.Y-b.Y) }

// sees reports whether a place lies well inside of what was inspected.
func (s sight) sees(p pipeline.Point, tolerancePx float64) bool {
	return s.radius == 0 || distance(p, s.centre) <= s.radius-2*tolerancePx
}

// near returns the defect nearest to a place within the tolerance.
func (s sight) near(p pipeline.Point, tolerancePx float64) (pipeline.Point, bool) {
	best, found := tolerancePx, false
	var at pipeline.Point
	for _, q := range s.points {
		if d := distance(p, q); d <= best {
			best, at, found = d, q, true
		}
	}
	return at, found
}

// memory is the latest sights of a view, oldest first, one for each unit.
type memory struct{ sights []sight }

// depthOf is how many sights are kept for alarms over n units: some do not see the place.
func depthOf(n int) int { return 4 * n }

// add keeps a sight. A unit that is shown again stands for itself once.
func (m *memory) add(s sight, depth int) {
	m.sights = slices.DeleteFunc(m.sights, func(old sight) bool { return old.unit == s.unit })
	m.sights = append(m.sights, s)
	if over := len(m.sights) - depth; over > 0 {
		m.sights = slices.Delete(m.sights, 0, over)
	}
}

// stays returns the first place of the newest sight that n successive units have, and those
// units, oldest first. Places for which known is true are left out.
func (m *memory) stays(n int, tolerancePx float64, known func(pipeline.Point) bool) (at pipeline.Point, units []string, ok bool) {
	if len(m.sights) < n {
		return at, nil, false
	}
	for _, p := range m.sights[len(m.sights)-1].points {
		if known(p) {
			continue
		}
		if at, units = m.streak(p, n, tolerancePx); len(units) == n {
			return at, units, true
		}
	}
	return at, nil, false
}

// streak returns the latest units, n at most and oldest first, that have a defect at a
// place, and the mean of where.
func (m *memory) streak(p pipeline.Point, n int, tolerancePx float64) (mean pipeline.Point, units []string) {
	for _, s := range slices.Backward(m.sights) {
		q, has := s.near(p, tolerancePx)
		if !has && !s.sees(p, tolerancePx) {
			continue
		}
		if !has || len(units) == n {
			break
		}
		units = append(units, s.id)
		k := float64(len(units))
		mean.X, mean.Y = mean.X+(q.X-mean.X)/k, mean.Y+(q.Y-mean.Y)/k
	}
	slices.Reverse(units)
	return mean, units
}

// clean reports whether the latest n units that see a place have no defect there.
func (m *memory) clean(p pipeline.Point, n int, tolerancePx float64) bool {
	seen := 0
	for _, s := range slices.Backward(m.sights) {
		if _, has := s.near(p, tolerancePx); has {
			return false
		}
		if s.sees(p, tolerancePx) {
			seen++
		}
		if seen == n {
			return true
		}
	}
	return false
}
