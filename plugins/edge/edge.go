package edge

import (
	"context"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "edge", Version: "2", Scope: pipeline.ScopeView,
	Summary: "Finds chips in the outline of a silhouette and measures their reach from the fitted edge.",
	Reads:   []string{pipeline.RawPlane, "region", "geometry"},
	Writes:  []string{"defects", "measurements", "coverage"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// outsidePx is how far outside the circle the level of the surroundings is taken.
const outsidePx = 8

// Run implements pipeline.Stage. Without a part found as a circle there is no edge.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	raw, err := item.Raw()
	if err != nil {
		return err
	}
	if item.Region == nil || item.Geometry == nil {
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	}
	r := item.Region
	if r.RadiusPx < 2 || ctx.Err() != nil {
		return ctx.Err()
	}
	_, _, scale := item.Geometry.ToStation(r.CentreX, r.CentreY)
	inside := st.s.MaxReachUM / scale
	if inside == 0 {
		inside = r.RadiusPx / 10
	}
	circle := raster.Circle{X: r.CentreX, Y: r.CentreY, R: r.RadiusPx}
	reach, contrast := raster.Outline(raw, raster.OutlineSearch{Circle: circle, Inside: min(max(inside, 4), r.RadiusPx), Outside: outsidePx, DarkInside: st.s.Polarity == "dark"})
	spread, seen := settle(reach)
	item.Measure("edge_spread_um", spread*scale, "um")
	st.cover(item, seen)
	defects := slices.Clone(item.Defects)
	for _, c := range st.chips(st.withoutNotch(reach, scale), scale) {
		defects = append(defects, st.defect(item, c, circle, scale, contrast, spread))
	}
	item.Defects = defects
	return ctx.Err()
}

// cover is the share of the edge that was seen. A view that another stage covers keeps
// the smaller share.
func (st stage) cover(item *pipeline.Item, seen float64) {
	if item.Grid == nil || seen < item.Coverage.Share {
		item.Coverage.Share = seen
	}
}

// settle takes the median off, so that the fit's own offset is no reach, and returns the
// robust spread of the rest, px, and the share of directions that were seen.
func settle(reach []float64) (spread, seen float64) {
	var known []float64
	for _, v := range reach {
		if !math.IsNaN(v) {
			known = append(known, v)
		}
	}
	if len(known) == 0 {
		return 0, 0
	}
	slices.Sort(known)
	m := known[len(known)/2]
	for i, v := range known {
		known[i] = math.Abs(v - m)
	}
	for i := range reach {
		reach[i] -= m
	}
	slices.Sort(known)
	return 1.4826 * known[len(known)/2], float64(len(known)) / float64(len(reach))
}

// chip is a run of directions, first to last (last may run past the end and start anew).
type chip struct {
	first, last, deepest int
	reach, area          float64 // px, px²
}

func (st stage) chips(reach []float64, scale float64) []chip {
	least, gap := max(st.s.MinReachUM/scale, 1), int(st.s.GapUM/scale)
	if st.s.GapUM == 0 {
		gap = 3
	}
	n := len(reach)
	start := slices.IndexFunc(reach, func(v float64) bool { return !(v >= least) })
	if start < 0 {
		return nil // nothing is at the edge: the circle is not the part's, which the region holds
	}
	var out []chip
	for i := start; i < start+n; i++ {
		v := reach[i%n]
		if !(v >= least) {
			continue
		}
		if len(out) == 0 || i-out[len(out)-1].last > gap {
			out = append(out, chip{first: i})
		}
		c := &out[len(out)-1]
		c.last = i
		c.area += v
		if v > c.reach {
			c.reach, c.deepest = v, i
		}
	}
	return out
}

// withoutNotch takes the notch out of the outline: the run that fits it best or, where a
// chip beside it makes the run longer, the stretch of it that is most like half an ellipse
// of the notch's length and reach.
func (st stage) withoutNotch(reach []float64, scale float64) []float64 {
	if st.s.NotchReachUM == 0 {
		return reach
	}
	var notch *chip
	best := math.Inf(1)
	for _, k := range st.chips(reach, scale) {
		deep, long := math.Abs(k.reach*scale/st.s.NotchReachUM-1), k.length()*scale/st.s.NotchLengthUM-1
		if off := max(deep, math.Abs(long)); deep <= 0.25 && long >= -0.25 && off < best {
			best, notch = off, &k
		}
	}
	if notch == nil {
		return reach
	}
	first, last := notch.first, notch.last
	if best > 0.25 { // longer than a notch
		first, last = likeANotch(reach, *notch, st.s.NotchLengthUM/scale, st.s.NotchReachUM/scale)
	}
	out := slices.Clone(reach)
	for i := first; i <= last; i++ {
		out[i%len(out)] = 0
	}
	return out
}

// flank is how far, in directions, the blur carries a notch over each of its ends.
const flank = 3

// likeANotch returns the first and last direction of the stretch of a run that differs least,
// in the sum of squares, from half an ellipse.
func likeANotch(reach []float64, k chip, length, depth float64) (first, last int) {
	half, best := length/2, math.Inf(1)
	for middle := k.first; middle <= k.last; middle++ {
		sum := 0.
		for i := middle - int(half); i <= middle+int(half); i++ {
			x := float64(i-middle) / half
			d := inwards(reach[(i+len(reach))%len(reach)]) - depth*math.Sqrt(max(1-x*x, 0))
			sum += d * d
		}
		if sum < best {
			best, first, last = sum, middle-int(half)-flank, middle+int(half)+flank
		}
	}
	return max(first, k.first), min(last, k.last)
}

// inwards is a reach, 0 where the edge was not seen.
func inwards(v float64) float64 {
	if v > 0 {
		return v
	}
	return 0
}

func (k chip) length() float64 { return float64(k.last - k.first + 1) }

func (st stage) defect(item *pipeline.Item, k chip, c raster.Circle, scale, contrast, spread float64) pipeline.Defect {
	n := max(int(math.Ceil(2*math.Pi*c.R)), 8)
	at := func(i int, reach float64) (x, y float64) {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / float64(n))
		return c.X + (c.R-reach)*cos, c.Y + (c.R-reach)*sin
	}
	x, y := at(k.deepest, k.reach/2)
	u, v, _ := item.Geometry.ToStation(x, y)
	arc := 2 * math.Pi * c.R / float64(n)
	length, area := k.length()*arc, k.area*arc
	diameter := math.Sqrt(4 * area / math.Pi)
	d := pipeline.Defect{Kind: pipeline.EdgeChip, View: item.View, Place: pipeline.Place{XPx: x, YPx: y, UUM: u, VUM: v},
		AreaPx: int(area + 0.5), AreaUM2: area * scale * scale, LengthUM: length * scale, WidthUM: k.reach * scale, DiameterUM: diameter * scale,
		LengthPx: length, WidthPx: k.reach, DiameterPx: diameter, AngleDeg: tangentDeg(2 * math.Pi * float64(k.deepest) / float64(n)),
		Flux: contrast * area, PeakDN: contrast, PeakSigma: k.reach / max(spread, 0.01), SNR: k.reach / max(spread, 0.01), Dark: st.s.Polarity == "bright"}
	if z, ok := item.Region.ZoneAt(x, y); ok {
		d.Zone = z.Name
	}
	for _, i := range []int{k.first, k.deepest, k.last} {
		px, py := at(i, 0)
		d.Box = around(d.Box, px, py)
	}
	px, py := at(k.deepest, k.reach)
	d.Box = around(d.Box, px, py)
	return d
}

// tangentDeg is the direction of the edge where the ray at an angle meets it, −90 to 90.
func tangentDeg(ray float64) float64 {
	a := math.Mod(ray*180/math.Pi+90, 180)
	if a > 90 {
		a -= 180
	}
	return a
}

// around grows a box by the pixel at (x, y).
func around(b pipeline.Box, x, y float64) pipeline.Box {
	p := pipeline.Box{X0: int(math.Floor(x)), Y0: int(math.Floor(y)), X1: int(math.Ceil(x)) + 1, Y1: int(math.Ceil(y)) + 1}
	if b == (pipeline.Box{}) {
		return p
	}
	return pipeline.Box{X0: min(b.X0, p.X0), Y0: min(b.Y0, p.Y0), X1: max(b.X1, p.X1), Y1: max(b.Y1, p.Y1)}
}
