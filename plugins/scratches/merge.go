package scratches

import (
	"cmp"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster/lines"
)

// besidePx is how far beside a scratch the course of a piece of it may lie, px, beyond half
// of the scratch's width.
const besidePx = 1.5

// Two scratches of which this share of one lies on the other are one.
const sharePart = 0.5

// wholeShare is the share of a line's length that a blob must have to stand for it: its own
// measures are then the better ones.
const wholeShare = 0.8

// add makes defects of the lines and brings them together with those already there.
func (st *stage) add(item *pipeline.Item, found *lines.Result) {
	item.Truncated = item.Truncated || found.Truncated
	var kept []pipeline.Defect
	gone := make([]bool, len(item.Defects))
	for _, l := range found.Lines {
		d := defect(item, l)
		pieces := piecesOf(d, item.Defects, gone)
		if i := whole(d, item.Defects, pieces); i >= 0 {
			for _, k := range pieces {
				gone[k] = gone[k] || k != i
			}
			continue
		}
		for _, k := range pieces {
			gone[k] = true
			absorb(&d, item.Defects[k])
		}
		kept = append(kept, d)
	}
	defects := make([]pipeline.Defect, 0, len(item.Defects)+len(kept))
	for i, d := range item.Defects {
		if !gone[i] {
			defects = append(defects, d)
		}
	}
	defects = append(defects, kept...)
	if len(defects) > pipeline.MaxDefects {
		defects, item.Truncated = strongest(defects), true
	}
	item.Defects = defects
}

// strongest keeps the MaxDefects defects with the highest peaks, in their old order.
func strongest(all []pipeline.Defect) []pipeline.Defect {
	order := make([]int, len(all))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(all[b].PeakSigma, all[a].PeakSigma) })
	order = order[:pipeline.MaxDefects]
	slices.Sort(order)
	out := make([]pipeline.Defect, len(order))
	for i, k := range order {
		out[i] = all[k]
	}
	return out
}

// piecesOf lists the defects that are the scratch or a piece of it.
func piecesOf(d pipeline.Defect, all []pipeline.Defect, gone []bool) []int {
	var out []int
	for i, o := range all {
		if !gone[i] && o.Dark == d.Dark && apart(o.Box, d.Box) <= 4 && same(o, d) {
			out = append(out, i)
		}
	}
	return out
}

func apart(a, b pipeline.Box) int {
	return max(a.X0-b.X1, b.X0-a.X1, a.Y0-b.Y1, b.Y0-a.Y1)
}

// A dig that lies on a scratch is a piece of it when it is hardly wider and hardly higher.
const (
	pieceWidth  = 1.25 // times the scratch's width, and 1 px more
	pieceHeight = 3    // times the scratch's height
)

// same reports whether a defect is the scratch or a piece of it: its course lies along the
// scratch's, or the other way round, and a dig does not stand out from the scratch.
func same(o, d pipeline.Defect) bool {
	switch o.Kind {
	case pipeline.Scratch:
		return onto(o, d) >= sharePart || onto(d, o) >= sharePart
	case pipeline.Dig:
		return o.WidthPx <= pieceWidth*d.WidthPx+1 && o.PeakDN <= pieceHeight*d.PeakDN && onto(o, d) == 1
	}
	return false
}

// onto returns the share of o's course that lies on d's body.
func onto(o, d pipeline.Defect) float64 {
	reach, path := d.WidthPx/2+besidePx, course(d)
	on, all := 0., 0.
	for _, p := range dense(course(o)) {
		all++
		if pipeline.ToPath(p, path) <= reach {
			on++
		}
	}
	return on / all
}

// course returns points along a defect: its path, or its long axis.
func course(d pipeline.Defect) []pipeline.Point {
	if len(d.Path) > 1 {
		return d.Path
	}
	sin, cos := math.Sincos(d.AngleDeg * math.Pi / 180)
	h := max(d.LengthPx-d.WidthPx, 0) / 2
	return []pipeline.Point{{X: d.XPx - h*cos, Y: d.YPx - h*sin}, {X: d.XPx + h*cos, Y: d.YPx + h*sin}}
}

// dense adds points so that no two are further than 8 px apart.
func dense(path []pipeline.Point) []pipeline.Point {
	out := []pipeline.Point{path[0]}
	for i := 1; i < len(path); i++ {
		a, b := path[i-1], path[i]
		n := int(math.Hypot(b.X-a.X, b.Y-a.Y)/8) + 1
		for k := 1; k <= n; k++ {
			t := float64(k) / float64(n)
			out = append(out, pipeline.Point{X: a.X + t*(b.X-a.X), Y: a.Y + t*(b.Y-a.Y)})
		}
	}
	return out
}

// whole returns the piece that is as good as all of the scratch, −1 for none.
func whole(d pipeline.Defect, all []pipeline.Defect, pieces []int) int {
	best := -1
	for _, i := range pieces {
		if all[i].Kind == pipeline.Scratch && all[i].LengthPx >= wholeShare*d.LengthPx && (best < 0 || all[i].LengthPx > all[best].LengthPx) {
			best = i
		}
	}
	return best
}

// absorb gives the scratch what its piece showed more clearly.
func absorb(d *pipeline.Defect, piece pipeline.Defect) {
	d.PeakDN, d.PeakSigma = max(d.PeakDN, piece.PeakDN), max(d.PeakSigma, piece.PeakSigma)
	d.Saturated = d.Saturated || piece.Saturated
	d.SNR = max(d.SNR, piece.SNR)
}
