package raster

import (
	"math"
	"slices"
)

// How far, in sigmas of one pixel, a cell's level may lie from the median of its
// neighbourhood and stay. A defect that fills part of a cell pulls its level and widens its
// scatter; haze that changes from cell to cell moves the level alone, and is to be followed.
// A cell counts as even while its sigma is at most evenSpread times the median of its
// neighbourhood: a defect that brings a share f of it up by c sigmas moves the level by fc
// and the variance by f(1 − f)c², so that with these numbers none of more than 1.4 sigmas
// over less than the whole cell is followed. A whole cell's mean is known to 1/64 sigma.
const (
	medianStep = 0.3
	evenStep   = 1.0
	evenSpread = 1.15
)

// smooth replaces the noise by the median of each 3 × 3 cells, and the level where it is
// too far from that.
func (g *Grid) smooth() {
	noise := g.medianOf(g.Noise, false)
	level := g.medianOf(g.Level, true)
	for i, m := range level {
		step := medianStep * g.Noise[i]
		if g.Noise[i] <= evenSpread*noise[i] {
			step = evenStep * noise[i]
		}
		if math.Abs(g.Level[i]-m) <= step {
			level[i] = g.Level[i]
		}
	}
	g.Level, g.Noise = level, noise
}

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

// grainStep is the distance, in px, between the places where the filtered picture is
// sampled: about as far as the 5 × 5 filter makes neighbours alike.
const grainStep = 4

// leastSamples is how many samples a cell needs for a grain factor of its own.
const leastSamples = 24

// addGrain multiplies the noise by the grain factor.
func (g *Grid) addGrain(src *Plane, mask, bad *Mask, s GridSettings) {
	cells := make([][]float32, len(g.Level))
	for y := 2; y+2 < src.Height; y += grainStep {
		for x := 2; x+2 < src.Width; x += grainStep {
			if mean, ok := filteredAt(src, mask, bad, x, y); ok {
				i := y/g.CellPx*g.Columns + x/g.CellPx
				cells[i] = append(cells[i], mean-float32(g.levelAt(float64(x), float64(y))))
			}
		}
	}
	factor := make([]float64, len(g.Level))
	known := make([]bool, len(g.Level))
	var c clipper
	for i, samples := range cells {
		known[i] = len(samples) >= leastSamples && g.Noise[i] > 0
		if known[i] {
			_, sigma := c.moments(samples, s.ClipSigma, s.FloorDN*MatchedGain)
			factor[i] = sigma / (MatchedGain * g.Noise[i])
		}
	}
	g.multiply(factor, known)
}

// filteredAt returns the 5 × 5 binomial mean at (x, y); false where a pixel is missing.
func filteredAt(src *Plane, mask, bad *Mask, x, y int) (float32, bool) {
	sum := float32(0)
	for v := -2; v <= 2; v++ {
		row, in := src.Row(y + v)[x-2:x+3], mask.Row(y + v)[x-2:x+3]
		part := float32(0)
		for u, w := range binomial {
			if !in[u] || bad != nil && bad.Bits[(y+v)*bad.Width+x-2+u] {
				return 0, false
			}
			part += w * row[u]
		}
		sum += binomial[v+2] * part
	}
	return sum, true
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
