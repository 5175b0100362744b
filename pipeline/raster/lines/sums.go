package lines

// #include "lines.h"
import "C"

import "unsafe"

// sums returns the sums of all slopes over one strip, for lines that enter it at x to
// x + width − 1: [slope][x].
func (w *work) sums(axis, first int, flipped bool, x, width int) []int16 {
	out, flag := make([]int16, rows*width), C.int32_t(0)
	if flipped {
		flag = 1
	}
	C.ln_sums(w.c, C.int32_t(axis), C.int32_t(first), flag, C.int32_t(x), C.int32_t(width), (*C.int16_t)(unsafe.Pointer(unsafe.SliceData(out))))
	return out
}
