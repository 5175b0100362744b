package lines

import (
	"bytes"
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

// Whole returns the region that is all of a picture.
func Whole(width, height int) raster.Rows {
	out := make([]raster.Span, height)
	for y := range out {
		out[y] = raster.Span{Y: y, X1: width}
	}
	return raster.NewRows(out, width, height)
}
