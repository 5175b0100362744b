package deflectometry

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// told is how many defects have their slope among the measurements.
const told = 20

// dent is a connected place that is too steep, filled: in the middle of a dent the
// slope is zero.
type dent struct {
	spans []raster.Span
	peak  float64 // mrad
}

// mark adds a defect for every place that is too steep, the steepest first. Its kind is
// dig; its peak slope is the measurement dent_n_slope_mrad, n from 1.
func (st stage) mark(item *pipeline.Item, slope []float64, width int) {
	steep := raster.NewMask(width, len(slope)/width)
	for i, v := range slope {
		steep.Bits[i] = v > st.s.MaxSlopeMrad
	}
	var dents []dent
	for _, spans := range raster.Components(steep) {
		if raster.SpanArea(spans) >= st.s.MinAreaPx {
			dents = append(dents, dent{filled(spans), peakOf(spans, slope, width)})
		}
	}
	dents = outermost(dents)
	slices.SortStableFunc(dents, func(a, b dent) int { return cmp.Compare(b.peak, a.peak) })
	if len(dents) > pipeline.MaxDefects {
		dents, item.Truncated = dents[:pipeline.MaxDefects], true
	}
	defects := slices.Clone(item.Defects)
	for i, d := range dents {
		if i < told {
			item.Measure(fmt.Sprintf("dent_%d_slope_mrad", i+1), d.peak, "mrad")
		}
		defects = append(defects, defect(item, d))
	}
	item.Defects = defects
}

func peakOf(spans []raster.Span, slope []float64, width int) float64 {
	peak := 0.0
	for _, s := range spans {
		peak = max(peak, slices.Max(slope[s.Y*width+s.X0:s.Y*width+s.X1]))
	}
	return peak
}

// filled joins the spans of each row into one.
func filled(spans []raster.Span) []raster.Span {
	rows := map[int]raster.Span{}
	for _, s := range spans {
		if r, ok := rows[s.Y]; ok {
			s.X0, s.X1 = min(s.X0, r.X0), max(s.X1, r.X1)
		}
		rows[s.Y] = s
	}
	var out []raster.Span
	for _, r := range rows {
		out = append(out, r)
	}
	slices.SortFunc(out, func(a, b raster.Span) int { return cmp.Compare(a.Y, b.Y) })
	return out
}

// outermost drops places that lie within another one, and gives that their peak.
func outermost(dents []dent) []dent {
	var out []dent
	slices.SortStableFunc(dents, func(a, b dent) int { return cmp.Compare(raster.SpanArea(b.spans), raster.SpanArea(a.spans)) })
	for _, d := range dents {
		i := slices.IndexFunc(out, func(o dent) bool { return holds(o.spans, d.spans[0]) })
		if i < 0 {
			out = append(out, d)
			continue
		}
		out[i].peak = max(out[i].peak, d.peak)
	}
	return out
}

func holds(spans []raster.Span, s raster.Span) bool {
	return slices.ContainsFunc(spans, func(o raster.Span) bool { return o.Y == s.Y && o.X0 <= s.X0 && s.X1 <= o.X1 })
}

func defect(item *pipeline.Item, d dent) pipeline.Defect {
	s := raster.ShapeOf(d.spans)
	out := pipeline.Defect{Kind: pipeline.Dig, View: item.View, Place: pipeline.Place{XPx: s.X, YPx: s.Y}, AreaPx: int(s.Area),
		DiameterPx: s.Diameter(), LengthPx: s.Length, WidthPx: s.Width, AngleDeg: s.Angle, Box: boxOf(d.spans)}
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
	b := pipeline.Box{X0: math.MaxInt, Y0: spans[0].Y, Y1: spans[len(spans)-1].Y + 1}
	for _, s := range spans {
		b.X0, b.X1 = min(b.X0, s.X0), max(b.X1, s.X1)
	}
	return b
}
