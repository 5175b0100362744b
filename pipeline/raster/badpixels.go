package raster

import "slices"

// ReplaceBad writes to each bad pixel of p the median of the good pixels among its
// eight neighbours; where none is good the square grows until one is. A plane
// without a good pixel becomes 0. Other pixels stay as they are.
func ReplaceBad(p *Plane, bad *Mask) {
	checkMask(p, bad)
	if bad.Count() == len(bad.Bits) {
		clear(p.Pix)
		return
	}
	var near []float64
	for y := range p.Height {
		for x, is := range bad.Row(y) {
			if !is {
				continue
			}
			near = near[:0]
			for r := 1; len(near) == 0; r++ {
				near = appendGood(near, p, bad, x, y, r)
			}
			p.Set(x, y, float32(median(near)))
		}
	}
}

// appendGood appends the good pixels of the square of ±r px around (x, y).
func appendGood(dst []float64, p *Plane, bad *Mask, x, y, r int) []float64 {
	dst = slices.Grow(dst, 8)
	for v := max(y-r, 0); v <= min(y+r, p.Height-1); v++ {
		for u := max(x-r, 0); u <= min(x+r, p.Width-1); u++ {
			if !bad.Bits[v*bad.Width+u] {
				dst = append(dst, float64(p.At(u, v)))
			}
		}
	}
	return dst
}
