package raster

import (
	"math"
)

// Coarse is a picture reduced to square cells that start at the frame's corner: pixel
// (i, j) of its planes is cell (i, j), whose middle lies at CellPx·(i + ½) − ½.
type Coarse struct {
	CellPx int
	Level  *Plane // DN, clipped mean of the cell; 0 where not valid
	Valid  *Mask  // at least half of the cell's pixels are in the mask and not bad
}

// coarseStep is the distance of the pixels from which a cell's clipping limits are taken.
const coarseStep = 2

// coarseClip is how many robust sigmas from its median a pixel still counts: small
// defects do not lift their cell.
const coarseClip = 3

// CoarseLevels reduces src to cells of cellPx pixels. A cell's level is the mean of its
// pixels within median ± 3·1.4826·MAD, both taken of every second pixel in each
// direction. bad may be nil. It panics when the sizes differ or cellPx is below 4.
func CoarseLevels(src *Plane, mask, bad *Mask, cellPx int) *Coarse {
	checkMask(src, mask)
	if bad != nil {
		checkMask(src, bad)
	}
	if cellPx < 4 {
		panic("raster: coarse cells below 4 px")
	}
	columns, rows := (src.Width+cellPx-1)/cellPx, (src.Height+cellPx-1)/cellPx
	c := &Coarse{CellPx: cellPx, Level: NewPlane(columns, rows), Valid: NewMask(columns, rows)}
	values, sample := make([]float32, 0, cellPx*cellPx), make([]float32, 0, cellPx*cellPx)
	for j := range rows {
		for i := range columns {
			values, sample = cellValues(values[:0], sample[:0], src, mask, bad, i*cellPx, j*cellPx, cellPx)
			if 2*len(values) >= cellPx*cellPx && len(sample) > 0 {
				c.Valid.Set(i, j, true)
				c.Level.Set(i, j, clippedMean(values, sample))
			}
		}
	}
	return c
}

func cellValues(values, sample []float32, src *Plane, mask, bad *Mask, x0, y0, side int) (all, some []float32) {
	for y := y0; y < min(y0+side, src.Height); y++ {
		row, in := src.Row(y), mask.Row(y)
		for x := x0; x < min(x0+side, src.Width); x++ {
			if !in[x] || bad != nil && bad.Bits[y*bad.Width+x] {
				continue
			}
			values = append(values, row[x])
			if (x-x0)%coarseStep == 0 && (y-y0)%coarseStep == 0 {
				sample = append(sample, row[x])
			}
		}
	}
	return values, sample
}

// clippedMean uses sample up.
func clippedMean(values, sample []float32) float32 {
	m := Nth(sample, len(sample)/2)
	for i, v := range sample {
		sample[i] = max(v-m, m-v)
	}
	reach := coarseClip * 1.4826 * (Nth(sample, len(sample)/2) + 0.25)
	n, sum := 0, 0.
	for _, v := range values {
		if v >= m-reach && v <= m+reach {
			n++
			sum += float64(v)
		}
	}
	return float32(sum / float64(max(n, 1)))
}

// surfaceTerms is how many terms the polynomial of each order has.
var surfaceTerms = [3]int{1, 3, 6}

// MaxSurfaceOrder is the highest order of Unevenness.
const MaxSurfaceOrder = 2

// Unevenness fits a polynomial surface of order 0 to 2 to the valid cells and returns
// cell − surface (0 where not valid) with its robust sigma, 1.4826·MAD. The fit starts at the
// median and takes in higher orders one by one, by least squares with Tukey's biweight
// (c = 4.685 sigma; Beaton and Tukey 1974), so that up to nearly half of the cells may
// stand out without pulling it. It returns false with fewer than twice as many cells as terms.
func (c *Coarse) Unevenness(order int) (residual *Plane, sigma float64, ok bool) {
	cells := c.cells()
	if order < 0 || order > MaxSurfaceOrder {
		panic("raster: order of a surface out of range")
	}
	if len(cells) < 2*surfaceTerms[order] {
		return nil, 0, false
	}
	levels := make([]float64, len(cells))
	for k, p := range cells {
		levels[k] = p.level
	}
	fit := [6]float64{median(levels)}
	for n := 0; n <= order; n++ {
		for range 12 {
			sigma = residualScale(cells, fit)
			next, solved := reweighted(cells, fit, sigma, surfaceTerms[n])
			if !solved {
				break
			}
			moved := 0.
			for k := range fit {
				moved = max(moved, math.Abs(next[k]-fit[k]))
			}
			fit = next
			if moved < settled*sigma {
				break
			}
		}
	}
	residual = NewPlane(c.Level.Width, c.Level.Height)
	for _, p := range cells {
		residual.Set(p.i, p.j, float32(p.level-p.surface(fit)))
	}
	return residual, residualScale(cells, fit), true
}

// settled is the share of sigma by which no term of a fit moves any more.
const settled = 1e-5

// cell is a valid cell with the terms of the polynomial at its place, −1 to 1 across.
type cell struct {
	i, j  int
	level float64
	terms [6]float64
}

func (p cell) surface(fit [6]float64) float64 {
	sum := 0.
	for k, t := range p.terms {
		sum += t * fit[k]
	}
	return sum
}

func (c *Coarse) cells() []cell {
	var out []cell
	half := float64(max(c.Level.Width, c.Level.Height)) / 2
	for j := range c.Level.Height {
		for i := range c.Level.Width {
			if c.Valid.At(i, j) {
				x, y := (float64(i)+0.5)/half-1, (float64(j)+0.5)/half-1
				out = append(out, cell{i, j, float64(c.Level.At(i, j)), [6]float64{1, x, y, x * x, x * y, y * y}})
			}
		}
	}
	return out
}

// residualScale returns 1.4826 times the median absolute residual.
func residualScale(cells []cell, fit [6]float64) float64 {
	off := make([]float64, len(cells))
	for k, p := range cells {
		off[k] = math.Abs(p.level - p.surface(fit))
	}
	return 1.4826 * quickMedian(off)
}

// reweighted solves the normal equations of the first terms with biweights of the
// residuals of fit.
func reweighted(cells []cell, fit [6]float64, sigma float64, terms int) ([6]float64, bool) {
	a := make([][]float64, terms)
	for r := range a {
		a[r] = make([]float64, terms+1)
	}
	limit := 4.685 * max(sigma, 1e-6)
	for _, p := range cells {
		u := (p.level - p.surface(fit)) / limit
		if math.Abs(u) >= 1 {
			continue
		}
		w := (1 - u*u) * (1 - u*u)
		for r := range terms {
			for k := range terms {
				a[r][k] += w * p.terms[r] * p.terms[k]
			}
			a[r][terms] += w * p.terms[r] * p.level
		}
	}
	var out [6]float64
	ok := eliminate(a, out[:terms])
	return out, ok
}

// eliminate solves a linear system by Gaussian elimination with pivoting; false where it
// has no single solution. a is used up.
func eliminate(a [][]float64, out []float64) bool {
	n := len(a)
	for col := range n {
		pivot := col
		for row := col + 1; row < n; row++ {
			if math.Abs(a[row][col]) > math.Abs(a[pivot][col]) {
				pivot = row
			}
		}
		a[col], a[pivot] = a[pivot], a[col]
		if math.Abs(a[col][col]) < 1e-9 {
			return false
		}
		for row := range n {
			if row != col {
				f := a[row][col] / a[col][col]
				for k := col; k <= n; k++ {
					a[row][k] -= f * a[col][k]
				}
			}
		}
	}
	for i := range out {
		out[i] = a[i][n] / a[i][i]
	}
	return true
}
