package pipeline

import (
	"math"
	"slices"
)

// Registration is how two showings of one surface lie to each other, and which defects
// stayed. Numbers in lists are indices into the lists that were registered.
type Registration struct {
	Known       bool    // false: too little in common to say; nothing below holds then
	RotationDeg float64 // by which the second lies turned against the first, from u towards v
	ShiftUUM    float64 // of the second after that turn
	ShiftVUM    float64
	RMSUM       float64      // root mean square distance of the pairs, µm
	Pairs       []DefectPair // defects that both showings have
	Permanent   []int        // of the first: those in Pairs
	Removable   []int        // of the first: gone, or moved
	Arrived     []int        // of the second: not in the first at that place
}

// DefectPair is one defect in two showings.
type DefectPair struct {
	First, Second int
	DistanceUM    float64
}

// RegisterSettings say what is taken for the same defect.
type RegisterSettings struct {
	ToleranceUM float64 // how far apart a pair may lie after registration
	MaxShiftUM  float64 // how far the part's centre may be off between the showings
	SizeRatio   float64 // of the diameters of a pair, at most; from 1
	LeastPairs  int     // without which nothing is known; from 2
	// TurnDeg is by how much the second showing lies turned against the first, where a
	// datum tells; nil = it does not. A turn that is known needs no pairs.
	TurnDeg *float64
}

// DefaultRegister allows 50 µm between the places, 100 between the centres, twice
// the diameter, and wants three pairs.
var DefaultRegister = RegisterSettings{ToleranceUM: 50, MaxShiftUM: 100, SizeRatio: 2, LeastPairs: 3}

// mostAnchors is how many of the strongest defects of each showing rotations are tried by.
const mostAnchors = 60

// Register lays the second of two showings of a surface over the first, by rotation about
// the part's centre and a shift, in station coordinates. Every rotation that brings one
// defect onto another of its size is tried; the one with most and closest pairs
// (Σ 1 − (distance/tolerance)², the M-estimator of Torr and Zisserman 2000) is refined by least squares (the rigid motion of Kabsch 1976 in two
// dimensions) until the pairs stay. Nothing is known with fewer than LeastPairs pairs, or
// where another rotation gives as many; unless a datum gives the rotation, or nothing at
// all is left in the second showing.
func Register(first, second []Defect, s RegisterSettings) Registration {
	if len(first) > 0 && len(second) == 0 {
		return motion{}.registration(first, nil)
	}
	if turn, ok := s.knownTurn(first, second); ok {
		return registerTurned(first, second, s, turn)
	}
	var best, rival motion
	for _, turn := range s.turns(first, second) {
		m := motion{turn: turn}
		m.score(first, second, s, s.ToleranceUM+s.MaxShiftUM)
		switch {
		case m.better(best):
			if apart(m.turn, best.turn) > rivalTurn {
				rival = best
			}
			best = m
		case apart(m.turn, best.turn) > rivalTurn && m.better(rival):
			rival = m
		}
	}
	best.refine(first, second, s)
	rival.refine(first, second, s)
	if apart(best.turn, rival.turn) <= rivalTurn {
		rival = motion{} // they have become the same
	}
	if len(best.pairs) < max(s.LeastPairs, 2) || len(rival.pairs) >= len(best.pairs) || math.Hypot(best.u, best.v) > s.MaxShiftUM {
		return Registration{}
	}
	return best.registration(first, second)
}

// rivalTurn is how far apart, in radians, two rotations are different ones.
const rivalTurn = 2 * math.Pi / 180

func apart(a, b float64) float64 { return math.Abs(math.Remainder(a-b, 2*math.Pi)) }

// registerTurned lays the showings over each other by a turn that is known. With too few
// pairs to refine it, pairs may lie as far apart as the centres may be off, so that a
// defect is rather called permanent than removable.
func registerTurned(first, second []Defect, s RegisterSettings, turn float64) Registration {
	m := motion{turn: turn}
	m.score(first, second, s, s.ToleranceUM+s.MaxShiftUM)
	if len(m.pairs) < max(s.LeastPairs, 2) {
		return m.registration(first, second)
	}
	m.refine(first, second, s)
	if math.Hypot(m.u, m.v) > s.MaxShiftUM || apart(m.turn, turn) > rivalTurn {
		return Registration{}
	}
	return m.registration(first, second)
}

// knownTurn is the rotation that a datum gives, in radians.
func (s RegisterSettings) knownTurn(first, second []Defect) (float64, bool) {
	if s.TurnDeg != nil {
		return *s.TurnDeg * math.Pi / 180, true
	}
	a, ok := partTurn(first)
	b, also := partTurn(second)
	return b - a, ok && also
}

// turns lists the rotations to try: those that bring a strong defect onto one of its size.
func (s RegisterSettings) turns(first, second []Defect) []float64 {
	var out []float64
	for _, a := range anchors(first) {
		for _, b := range anchors(second) {
			ra, rb := math.Hypot(a.UUM, a.VUM), math.Hypot(b.UUM, b.VUM)
			if math.Abs(ra-rb) <= s.ToleranceUM+s.MaxShiftUM && min(ra, rb) > 4*s.ToleranceUM && s.alike(a, b) {
				out = append(out, math.Atan2(b.VUM, b.UUM)-math.Atan2(a.VUM, a.UUM))
			}
		}
	}
	return out
}

// partTurn is the angle between station and part coordinates.
func partTurn(list []Defect) (float64, bool) {
	for _, d := range list {
		if d.PartAngleKnown && math.Hypot(d.UUM, d.VUM) > 1 {
			return math.Atan2(d.VUM, d.UUM) - math.Atan2(d.PartVUM, d.PartUUM), true
		}
	}
	return 0, false
}

func anchors(list []Defect) []Defect {
	out := slices.Clone(list)
	slices.SortStableFunc(out, func(a, b Defect) int {
		switch {
		case a.SNR > b.SNR:
			return -1
		case a.SNR < b.SNR:
			return 1
		}
		return 0
	})
	return out[:min(len(out), mostAnchors)]
}

func (s RegisterSettings) alike(a, b Defect) bool {
	return a.Dark == b.Dark && max(a.DiameterUM, b.DiameterUM) <= s.SizeRatio*min(a.DiameterUM, b.DiameterUM)
}

// motion takes a point of the first showing to the second: turn, then shift.
type motion struct {
	turn, u, v float64
	pairs      []DefectPair
	off        float64 // sum of the squared distances
	weight     float64 // sum of 1 − (distance/tolerance)² of the pairs
}

func (m motion) better(o motion) bool {
	return m.weight > o.weight
}

func (m motion) apply(d Defect) (u, v float64) {
	sin, cos := math.Sincos(m.turn)
	return cos*d.UUM - sin*d.VUM + m.u, sin*d.UUM + cos*d.VUM + m.v
}

// score pairs every defect of the first with the nearest free one of the second, nearest
// pairs first.
func (m *motion) score(first, second []Defect, s RegisterSettings, tolerance float64) {
	var all []DefectPair
	for i, a := range first {
		u, v := m.apply(a)
		for j, b := range second {
			if d := math.Hypot(b.UUM-u, b.VUM-v); d <= tolerance && s.alike(a, b) {
				all = append(all, DefectPair{i, j, d})
			}
		}
	}
	slices.SortFunc(all, func(a, b DefectPair) int {
		switch {
		case a.DistanceUM < b.DistanceUM:
			return -1
		case a.DistanceUM > b.DistanceUM:
			return 1
		}
		return a.First - b.First
	})
	m.pairs, m.off, m.weight = nil, 0, 0
	usedA, usedB := map[int]bool{}, map[int]bool{}
	for _, p := range all {
		if !usedA[p.First] && !usedB[p.Second] {
			usedA[p.First], usedB[p.Second] = true, true
			m.pairs, m.off = append(m.pairs, p), m.off+p.DistanceUM*p.DistanceUM
			m.weight += 1 - p.DistanceUM*p.DistanceUM/(tolerance*tolerance)
		}
	}
}

// refine fits and pairs anew until the pairs stay. Pairs more than four times as far apart
// as the middle one have met by chance.
func (m *motion) refine(first, second []Defect, s RegisterSettings) {
	tolerance := s.ToleranceUM
	for range 10 {
		if len(m.pairs) < 2 {
			return
		}
		m.fit(first, second)
		m.score(first, second, s, tolerance)
		if n := len(m.pairs); n > 3 { // they are sorted by distance
			tolerance = min(s.ToleranceUM, max(4*m.pairs[n/2].DistanceUM, s.ToleranceUM/10))
		}
	}
}

// fit takes the rigid motion of least squares through the pairs.
func (m *motion) fit(first, second []Defect) {
	n := float64(len(m.pairs))
	if n < 2 {
		return
	}
	var au, av, bu, bv float64
	for _, p := range m.pairs {
		a, b := first[p.First], second[p.Second]
		au, av, bu, bv = au+a.UUM/n, av+a.VUM/n, bu+b.UUM/n, bv+b.VUM/n
	}
	var dot, cross float64
	for _, p := range m.pairs {
		a, b := first[p.First], second[p.Second]
		dot += (a.UUM-au)*(b.UUM-bu) + (a.VUM-av)*(b.VUM-bv)
		cross += (a.UUM-au)*(b.VUM-bv) - (a.VUM-av)*(b.UUM-bu)
	}
	m.turn = math.Atan2(cross, dot)
	sin, cos := math.Sincos(m.turn)
	m.u, m.v = bu-(cos*au-sin*av), bv-(sin*au+cos*av)
}

func (m motion) registration(first, second []Defect) Registration {
	r := Registration{Known: true, RotationDeg: math.Mod(m.turn*180/math.Pi+720, 360), ShiftUUM: m.u, ShiftVUM: m.v,
		RMSUM: math.Sqrt(m.off / float64(max(len(m.pairs), 1))), Pairs: m.pairs}
	stayed, known := map[int]bool{}, map[int]bool{}
	for _, p := range m.pairs {
		stayed[p.First], known[p.Second] = true, true
	}
	for i := range first {
		if stayed[i] {
			r.Permanent = append(r.Permanent, i)
		} else {
			r.Removable = append(r.Removable, i)
		}
	}
	for j := range second {
		if !known[j] {
			r.Arrived = append(r.Arrived, j)
		}
	}
	return r
}
