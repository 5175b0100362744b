package fused

// #include <stdlib.h>
// #include "objects.h"
import "C"

import (
	"errors"
	"unsafe"

	"lapgate/pipeline/raster"
)

type cSpan = C.pg_span

var errCount = errors.New("data: a count is higher than the pixel format allows; check pixel_format and byte order")

// firstError turns what the kernels return into an error.
func firstError(results ...C.int) error {
	for _, r := range results {
		switch r {
		case C.PG_OK:
		case C.PG_BAD_COUNT:
			return errCount
		default:
			return errMemory
		}
	}
	return nil
}

// pinned keeps a slice in place until the job ends and returns its first element's
// address, nil for an empty one.
func pinned[T any](j *job, s []T) unsafe.Pointer {
	if len(s) == 0 {
		return nil
	}
	p := unsafe.Pointer(unsafe.SliceData(s))
	j.pin.Pin(p)
	return p
}

// The kernels are for processors of 64 bits: C takes an int for an int64_t.
var _ = [1]struct{}{}[unsafe.Sizeof(int(0))-unsafe.Sizeof(C.int64_t(0))]

// grid is a grid in memory that C may use.
type grid struct {
	c      *C.pg_grid
	values []float64 // level, noise, mean, sigma, block
	filled []uint8
}

// newGrid returns a grid over values that stay in place: level, noise, mean, sigma, block.
func newGrid(j *job, columns, rows int, values []float64) *grid {
	n := columns * rows
	g := &grid{c: &C.pg_grid{columns: C.int32_t(columns), rows: C.int32_t(rows)}, values: values, filled: make([]uint8, n)}
	part := func(k int) *C.double { return (*C.double)(unsafe.SliceData(g.values[k*n : (k+1)*n])) }
	g.c.level, g.c.noise, g.c.mean, g.c.sigma, g.c.block = part(0), part(1), part(2), part(3), part(4)
	g.c.inside, g.c.valid = (*C.int64_t)(pinned(j, j.inside)), (*C.int64_t)(pinned(j, j.valid))
	g.c.filled = (*C.uint8_t)(pinned(j, g.filled))
	j.pin.Pin(g.c)
	return g
}

// takeGuess makes the grid of the first look in memory of C, as it is not needed to the
// end.
func (j *job) takeGuess() error {
	columns, rows := int(j.grid.c.columns), int(j.grid.c.rows)
	p := C.calloc(C.size_t(5*columns*rows), C.sizeof_double)
	if p == nil {
		return errMemory
	}
	j.guessBytes = int64(5 * columns * rows * C.sizeof_double)
	j.guess = newGrid(j, columns, rows, unsafe.Slice((*float64)(p), 5*columns*rows))
	return nil
}

func (j *job) dropGuess() {
	if j.guess != nil {
		C.free(unsafe.Pointer(unsafe.SliceData(j.guess.values)))
		j.guess = nil
	}
}

// raster returns the grid as the reference has it.
func (j *job) rasterGrid() *raster.Grid {
	g := j.grid
	n := len(g.filled)
	out := &raster.Grid{CellPx: j.s.Grid.CellPx, Columns: int(g.c.columns), Rows: int(g.c.rows),
		Level: g.values[:n:n], Noise: g.values[n : 2*n : 2*n],
		Inside: j.inside, Valid: j.valid, Filled: make([]bool, n)}
	for i, f := range g.filled {
		out.Filled[i] = f != 0
	}
	return out
}
