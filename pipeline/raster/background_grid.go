package raster

import (
	"math"
	"slices"
)

// medianOf returns the median over the measured cells of each 3 × 3 neighbourhood. With
// slope, missing neighbours are replaced by the point reflection of the opposite ones.
func (g *Grid) medianOf(values []float64, slope bool) []float64 {
	out := slices.Clone(values)
	var near [9]float64
	for i := range values {
		if g.Filled[i] {
			continue
		}
		n := 0
		for k := range 9 {
			if v, ok := g.neighbour(values, i, k%3-1, k/3-1, slope); ok {
				near[n] = v
				n++
			}
		}
		out[i] = median(near[:n])
	}
	return out
}

func (g *Grid) neighbour(values []float64, i, dx, dy int, slope bool) (float64, bool) {
	if j, ok := g.at(i, dx, dy); ok && !g.Filled[j] {
		return values[j], true
	}
	if j, ok := g.at(i, -dx, -dy); slope && ok && !g.Filled[j] {
		return 2*values[i] - values[j], true
	}
	return 0, false
}

// median sorts v and returns its median, the mean of the middle two for even lengths.
func median(v []float64) float64 {
	slices.Sort(v)
	n := len(v)
	return (v[n/2] + v[(n-1)/2]) / 2
}

// fill gives cells that were not measured the mean of what their neighbours say, ring
// by ring outwards from the measured ones.
func (g *Grid) fill() {
	known := make([]bool, len(g.Filled))
	left := 0
	for i, f := range g.Filled {
		known[i] = !f
		if f {
			left++
		}
	}
	for left > 0 && left < len(known) {
		next := slices.Clone(known)
		for i := range known {
			if !known[i] && g.fillCell(i, known) {
				next[i] = true
				left--
			}
		}
		known = next
	}
}

// fillCell takes level and noise from the known neighbours. In each direction the level
// goes on along the slope of two known cells, or stays as that of one.
func (g *Grid) fillCell(i int, known []bool) bool {
	n, level, noise := 0., 0., 0.
	for k := range 9 {
		dx, dy := k%3-1, k/3-1
		j, ok := g.at(i, dx, dy)
		if !ok || !known[j] {
			continue
		}
		l := g.Level[j]
		if f, ok := g.at(i, 2*dx, 2*dy); ok && known[f] {
			l = 2*l - g.Level[f]
		}
		n, level, noise = n+1, level+l, noise+g.Noise[j]
	}
	if n == 0 {
		return false
	}
	g.Level[i], g.Noise[i] = level/n, noise/n
	return true
}

// blockPx is the side of the blocks whose means show lay and grain. A block's mean has
// 1/4 of the noise of one pixel where that is white; the 5 × 5 filter has 0.2734.
const blockPx = 4

// leastBlocks is how many blocks a cell needs for a grain factor of its own.
const leastBlocks = 24

// addGrain multiplies the noise by the grain factor.
func (g *Grid) addGrain(src *Plane, mask, bad *Mask, s GridSettings) {
	cells := make([][]float32, len(g.Level))
	for y := 0; y+blockPx <= src.Height; y += blockPx {
		for x := 0; x+blockPx <= src.Width; x += blockPx {
			if mean, ok := blockMean(src, mask, bad, x, y); ok {
				const half = (blockPx - 1) / 2.
				i := y/g.CellPx*g.Columns + x/g.CellPx
				cells[i] = append(cells[i], mean-float32(g.levelAt(float64(x)+half, float64(y)+half)))
			}
		}
	}
	factor := make([]float64, len(g.Level))
	known := slices.Clone(g.Filled)
	var c clipper
	for i, blocks := range cells {
		known[i] = len(blocks) >= leastBlocks && g.Noise[i] > 0
		if known[i] {
			_, sigma := c.moments(blocks, s.ClipSigma, s.FloorDN/blockPx)
			factor[i] = blockPx * sigma / g.Noise[i]
		}
	}
	g.multiply(factor, known)
}

// multiply applies the median of the known factors around each cell where it is above 1.
func (g *Grid) multiply(factor []float64, known []bool) {
	var near [9]float64
	for i := range factor {
		n := 0
		for k := range 9 {
			if j, ok := g.at(i, k%3-1, k/3-1); ok && known[j] {
				near[n] = factor[j]
				n++
			}
		}
		if n > 0 {
			g.Noise[i] *= max(1, median(near[:n]))
		}
	}
}

func blockMean(src *Plane, mask, bad *Mask, x0, y0 int) (float32, bool) {
	sum := float32(0)
	for y := y0; y < y0+blockPx; y++ {
		row, in := src.Row(y), mask.Row(y)
		for x := x0; x < x0+blockPx; x++ {
			if !in[x] || bad != nil && bad.Bits[y*bad.Width+x] {
				return 0, false
			}
			sum += row[x]
		}
	}
	return sum / (blockPx * blockPx), true
}

// node returns the cell left of or above p and how far p lies beyond that cell's
// centre, in cells. Near the frame's edge the fraction is below 0 or above 1: the
// level goes on along its slope.
func (g *Grid) node(p float64, cells int) (int, float64) {
	c := (p+0.5)/float64(g.CellPx) - 0.5
	i := min(max(int(math.Floor(c)), 0), max(cells-2, 0))
	if cells == 1 {
		return 0, 0
	}
	return i, c - float64(i)
}

func (g *Grid) levelAt(x, y float64) float64 {
	ix, fx := g.node(x, g.Columns)
	iy, fy := g.node(y, g.Rows)
	top, bottom := g.Level[iy*g.Columns:], g.Level[min(iy+1, g.Rows-1)*g.Columns:]
	jx := min(ix+1, g.Columns-1)
	return (1-fy)*((1-fx)*top[ix]+fx*top[jx]) + fy*((1-fx)*bottom[ix]+fx*bottom[jx])
}

// Interpolate writes level and noise of every pixel, bilinear between the centres of
// the cells. Beyond the outermost centres the level goes on along its slope and the
// noise stays as it is. Both planes must have the size the grid was measured on.
func (g *Grid) Interpolate(level, noise *Plane) {
	if !level.SameSize(noise) || g.Columns != (level.Width+g.CellPx-1)/g.CellPx || g.Rows != (level.Height+g.CellPx-1)/g.CellPx {
		panic("raster: planes do not have the size of the grid")
	}
	for y := range level.Height {
		iy, fy := g.node(float64(y), g.Rows)
		a, b := iy*g.Columns, min(iy+1, g.Rows-1)*g.Columns
		g.interpolateRow(level.Row(y), g.Level, a, b, fy, false)
		g.interpolateRow(noise.Row(y), g.Noise, a, b, min(max(fy, 0), 1), true)
	}
}

// interpolateRow writes one row between the grid rows that start at a and b.
func (g *Grid) interpolateRow(dst []float32, values []float64, a, b int, fy float64, hold bool) {
	for x := 0; x < len(dst); {
		ix, fx := g.node(float64(x), g.Columns)
		jx := min(ix+1, g.Columns-1)
		left := (1-fy)*values[a+ix] + fy*values[b+ix]
		right := (1-fy)*values[a+jx] + fy*values[b+jx]
		end := len(dst)
		if ix < g.Columns-2 {
			end = min(end, (ix+1)*g.CellPx+(g.CellPx+1)/2)
		}
		for ; x < end; x++ {
			f := fx
			if hold {
				f = min(max(f, 0), 1)
			}
			dst[x] = float32(left + f*(right-left))
			fx += 1 / float64(g.CellPx)
		}
	}
}
