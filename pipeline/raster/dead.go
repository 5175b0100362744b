package raster

import "slices"

// leastRow is the shortest row whose values may not be all alike: shorter ones may be by
// chance.
const leastRow = 16

// DeadRows reports for each row whether no living sensor sends it: all of one value, or the
// row above again. Rows below 16 px say nothing.
func DeadRows(p *Plane) []bool {
	out := make([]bool, p.Height)
	if p.Width < leastRow {
		return out
	}
	for y := range out {
		row := p.Row(y)
		out[y] = constant(row) || y > 0 && slices.Equal(row, p.Row(y-1))
	}
	return out
}

func constant(v []float32) bool {
	for _, x := range v[1:] {
		if x != v[0] {
			return false
		}
	}
	return true
}

// DeadBlock reports whether a block is all of one value. Blocks at top or above are
// saturated and not dead.
func DeadBlock(p *Plane, x, y, side int, top float32) bool {
	v := p.At(x, y)
	if v >= top {
		return false
	}
	for r := y; r < y+side; r++ {
		for _, w := range p.Row(r)[x : x+side] {
			if w != v {
				return false
			}
		}
	}
	return true
}
