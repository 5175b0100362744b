package raster

import (
	"cmp"
	"slices"
)

// Rows is a set of pixels as runs: sorted, merged, and within the picture. Unlike a Mask it
// takes memory and time by the length of the outline, not by the area of the picture.
type Rows struct {
	spans  []Span
	starts []int32 // of each row in spans, and their end
}

// NewRows returns the pixels of spans, which may overlap and reach off the picture.
func NewRows(spans []Span, width, height int) Rows {
	order := func(a, b Span) int {
		if a.Y != b.Y {
			return cmp.Compare(a.Y, b.Y)
		}
		return cmp.Compare(a.X0, b.X0)
	}
	if !slices.IsSortedFunc(spans, order) {
		spans = slices.SortedFunc(slices.Values(spans), order)
	}
	r := Rows{spans: make([]Span, 0, len(spans)), starts: make([]int32, height+1)}
	for _, s := range spans {
		s.X0, s.X1 = max(s.X0, 0), min(s.X1, width)
		if s.Y < 0 || s.Y >= height || s.X0 >= s.X1 {
			continue
		}
		if n := len(r.spans) - 1; n >= 0 && r.spans[n].Y == s.Y && r.spans[n].X1 >= s.X0 {
			r.spans[n].X1 = max(r.spans[n].X1, s.X1)
			continue
		}
		r.spans = append(r.spans, s)
		r.starts[s.Y+1]++
	}
	for y := range height {
		r.starts[y+1] += r.starts[y]
	}
	return r
}

// Spans returns the runs, row by row from the top, left to right. They must not be changed.
func (r Rows) Spans() []Span { return r.spans }

// Count returns the number of pixels.
func (r Rows) Count() int { return SpanArea(r.spans) }

// At reports whether (x, y) is in the set; pixels off the picture are not.
func (r Rows) At(x, y int) bool {
	if y < 0 || y >= len(r.starts)-1 {
		return false
	}
	row := r.spans[r.starts[y]:r.starts[y+1]]
	i, found := slices.BinarySearchFunc(row, x, func(s Span, x int) int { return cmp.Compare(s.X0, x) })
	return found || i > 0 && x < row[i-1].X1
}
