package deflectometry

import (
	"cmp"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// place is a steep place: all of it above half the threshold, and what of it is above half
// its own peak, filled; in the middle of a dent the slope is zero.
type place struct {
	spans []raster.Span
	half  []raster.Span
	peak  float64 // mrad
}

// mark adds a defect for every steep place, the steepest first, with its peak slope.
func (st stage) mark(item *pipeline.Item, f field) {
	places := outermost(st.places(f))
	slices.SortStableFunc(places, func(a, b place) int { return cmp.Compare(b.peak, a.peak) })
	if len(places) > pipeline.MaxDefects {
		places, item.Truncated = places[:pipeline.MaxDefects], true
	}
	defects := slices.Clone(item.Defects)
	for _, p := range places {
		d := defect(item, p)
		if f.wavy(p) {
			d.Kind = pipeline.Waviness
		}
		defects = append(defects, d)
	}
	item.Defects = defects
}

// places returns those with enough pixels above the threshold.
func (st stage) places(f field) []place {
	low := st.s.MaxSlopeMrad / 2
	pieces, of := f.pieces(low, st.s.MinAreaPx)
	together := map[int][]raster.Span{}
	for i, g := range f.joined(len(pieces), of, low) {
		together[g] = append(together[g], pieces[i]...)
	}
	var out []place
	for i := range pieces { // in the order of the picture
		spans, first := together[i]
		if first && f.countAbove(spans, st.s.MaxSlopeMrad) >= st.s.MinAreaPx {
			out = append(out, f.place(spans))
		}
	}
	return out
}

func (f field) countAbove(spans []raster.Span, threshold float64) int {
	n := 0
	for _, s := range spans {
		for _, v := range f.total[s.Y*f.width+s.X0 : s.Y*f.width+s.X1] {
			if float64(v) > threshold {
				n++
			}
		}
	}
	return n
}

func (f field) place(spans []raster.Span) place {
	peak := 0.0
	for _, s := range spans {
		peak = max(peak, float64(slices.Max(f.total[s.Y*f.width+s.X0:s.Y*f.width+s.X1])))
	}
	box := boxOf(spans)
	mask := raster.NewMask(box.X1-box.X0, box.Y1-box.Y0)
	for _, s := range spans {
		for x := s.X0; x < s.X1; x++ {
			mask.Set(x-box.X0, s.Y-box.Y0, float64(f.total[s.Y*f.width+x]) >= peak/2)
		}
	}
	half := filled(mask)
	for i := range half {
		half[i].Y, half[i].X0, half[i].X1 = half[i].Y+box.Y0, half[i].X0+box.X0, half[i].X1+box.X0
	}
	return place{spans, half, peak}
}

// filled returns a mask with what lies between the first and the last pixel of each row
// and of each column.
func filled(m *raster.Mask) []raster.Span {
	out := raster.NewMask(m.Width, m.Height)
	fill := func(lines, length int, at func(line, k int) (x, y int)) {
		for line := range lines {
			first, last := length, -1
			for k := range length {
				if x, y := at(line, k); m.At(x, y) {
					first, last = min(first, k), k
				}
			}
			for k := first; k <= last; k++ {
				x, y := at(line, k)
				out.Set(x, y, true)
			}
		}
	}
	fill(m.Height, m.Width, func(line, k int) (x, y int) { return k, line })
	fill(m.Width, m.Height, func(line, k int) (x, y int) { return line, k })
	return out.Spans()
}

// outermost drops places that lie within another one, and gives that their peak.
func outermost(places []place) []place {
	var out []place
	slices.SortStableFunc(places, func(a, b place) int { return cmp.Compare(raster.SpanArea(b.half), raster.SpanArea(a.half)) })
	for _, p := range places {
		i := slices.IndexFunc(out, func(o place) bool { return holds(o.half, p.half[0]) })
		if i < 0 {
			out = append(out, p)
			continue
		}
		out[i].peak = max(out[i].peak, p.peak)
	}
	return out
}

func holds(spans []raster.Span, s raster.Span) bool {
	return slices.ContainsFunc(spans, func(o raster.Span) bool { return o.Y == s.Y && o.X0 <= s.X0 && s.X1 <= o.X1 })
}

// Waves are told from a dent by how often the slope turns: a dent has one slope down and
// one up, with a raised rim one more of each.
const (
	wavyTurns = 5    // slopes in a row, of alternating sign
	wavyShare = 0.25 // of the lines through the place on which there are so many
)

func (f field) wavy(p place) bool {
	b := boxOf(p.spans)
	for i, a := range f.axes() {
		l0, l1, k0, k1 := b.Y0, b.Y1, b.X0, b.X1
		if i == 1 {
			l0, l1, k0, k1 = b.X0, b.X1, b.Y0, b.Y1
		}
		wavy := 0
		for line := l0; line < l1; line++ {
			if a.turns(line, k0, k1, p.peak/2) >= wavyTurns {
				wavy++
			}
		}
		if float64(wavy) >= wavyShare*float64(l1-l0) {
			return true
		}
	}
	return false
}

// turns counts the slopes of alternating sign on a line that are steeper than low over two
// pixels or more.
func (a axis) turns(line, k0, k1 int, low float64) int {
	n, sign := 0, 0.0
	for k := k0 + 1; k < k1; k++ {
		s, before := a.slopeAt(line, k), a.slopeAt(line, k-1)
		if math.Abs(s) < low || math.Abs(before) < low || s*before < 0 || s*sign > 0 {
			continue
		}
		n, sign = n+1, s
	}
	return n
}

// defect measures a place at half its own peak.
func defect(item *pipeline.Item, p place) pipeline.Defect {
	s := raster.ShapeOf(p.half)
	out := pipeline.Defect{Kind: pipeline.Dent, View: item.View, Place: pipeline.Place{XPx: s.X, YPx: s.Y}, AreaPx: int(s.Area),
		DiameterPx: s.Diameter(), LengthPx: s.Length, WidthPx: s.Width, AngleDeg: s.Angle, Box: boxOf(p.half), SlopeMrad: p.peak}
	if item.Geometry != nil {
		u, v, um := item.Geometry.ToStation(s.X, s.Y)
		out.UUM, out.VUM = u, v
		out.AreaUM2, out.DiameterUM, out.LengthUM, out.WidthUM = s.Area*um*um, s.Diameter()*um, s.Length*um, s.Width*um
	}
	if item.Region != nil {
		zone, _ := item.Region.ZoneAt(s.X, s.Y)
		out.Zone = zone.Name
	}
	return out
}

func boxOf(spans []raster.Span) pipeline.Box {
	b := pipeline.Box{X0: math.MaxInt, Y0: math.MaxInt}
	for _, s := range spans {
		b.X0, b.X1 = min(b.X0, s.X0), max(b.X1, s.X1)
		b.Y0, b.Y1 = min(b.Y0, s.Y), max(b.Y1, s.Y+1)
	}
	return b
}
