package lines

import (
	"bytes"
	"slices"
	"unsafe"

	"lapgate/pipeline/raster"
)

// indexTrue returns where the first true is from x on, −1 for nowhere. A bool is one byte.
func indexTrue(row []bool, x int) int {
	if x >= len(row) {
		return -1
	}
	b := unsafe.Slice((*byte)(unsafe.Pointer(unsafe.SliceData(row))), len(row))
	if i := bytes.IndexByte(b[x:], 1); i >= 0 {
		return x + i
	}
	return -1
}

// inOrder returns the spans that lie in a picture, sorted by row and column.
func inOrder(region []raster.Span, width, height int) []raster.Span {
	out := make([]raster.Span, 0, len(region))
	for _, s := range region {
		s.X0, s.X1 = max(s.X0, 0), min(s.X1, width)
		if s.Y >= 0 && s.Y < height && s.X0 < s.X1 {
			out = append(out, s)
		}
	}
	order := func(a, b raster.Span) int {
		if a.Y != b.Y {
			return a.Y - b.Y
		}
		return a.X0 - b.X0
	}
	if !slices.IsSortedFunc(out, order) {
		slices.SortFunc(out, order)
	}
	return out
}

// Whole returns the region that is all of a picture.
func Whole(width, height int) []raster.Span {
	out := make([]raster.Span, height)
	for y := range out {
		out[y] = raster.Span{Y: y, X1: width}
	}
	return out
}
