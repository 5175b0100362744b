package raster

import "fmt"

// GridSettings say how level and noise are measured. Take DefaultGrid and change what
// needs changing.
type GridSettings struct {
	CellPx    int     // side of a square cell, px; at least 8
	ClipSigma float64 // values further than this many sigmas from the mean are left out
	MinShare  float64 // share of a cell's pixels that must be valid; below it the cell is filled
	FloorDN   float64 // smallest noise a cell may have, DN
	Grain     bool    // also measure the noise that the matched filter leaves
}

// DefaultGrid returns cells of 64 px, clipping at 3 sigmas, 1/32 of a cell as the
// least that can be measured, and 1/√12 DN (the quantisation noise of whole counts,
// EMVA Standard 1288) as the smallest noise.
func DefaultGrid() GridSettings {
	return GridSettings{CellPx: 64, ClipSigma: 3, MinShare: 1. / 32, FloorDN: 0.288675, Grain: true}
}

// Grid is the level and the noise of a picture on a coarse grid of square cells that
// starts at the frame's corner. Slices are row by row, Columns × Rows long.
type Grid struct {
	CellPx, Columns, Rows int
	Level                 []float64 // DN
	Noise                 []float64 // DN, see MeasureGrid
	Inside                []int     // pixels of the mask in the cell
	Valid                 []int     // of these, the ones that are not bad
	Filled                []bool    // too few valid pixels: taken from neighbours
}

// MeasureGrid measures level and noise of src in cells, over the pixels that are in
// mask and not in bad (nil = none bad).
//
// Level and sigma of a cell are clipped moments (see clipper). The sigma is replaced by
// the median of its 3 × 3 cells, and so is the level where it is more than 0.3 sigma
// away from that, or 1 sigma where the cell scatters no more than its neighbours (see
// medianStep). The level's median is not pulled by a slope: where a neighbour is
// missing, its point reflection 2·centre − opposite stands in. Noise is
// the sigma of one pixel times the grain factor max(1, sigma of the filtered picture /
// (MatchedGain · sigma of one pixel)): 1 for white noise, and more where lay or grain
// scatters the filtered picture more than white noise would. Cells with too few valid pixels
// take the level along the slope of their neighbours, and their neighbours' noise.
//
// It panics when the sizes differ or a setting is out of range.
func MeasureGrid(src *Plane, mask, bad *Mask, s GridSettings) *Grid {
	checkMask(src, mask)
	if bad != nil {
		checkMask(src, bad)
	}
	if s.CellPx < 8 || s.ClipSigma <= 0 || s.MinShare <= 0 || s.MinShare > 1 {
		panic(fmt.Sprintf("raster: grid settings %+v out of range", s))
	}
	g := newGrid(src.Width, src.Height, s.CellPx)
	g.measure(src, mask, bad, s)
	g.smooth()
	g.fill()
	if s.Grain {
		g.addGrain(src, mask, bad, s)
	}
	for i := range g.Noise {
		g.Noise[i] = max(g.Noise[i], s.FloorDN)
	}
	return g
}

func checkMask(p *Plane, m *Mask) {
	if p.Width != m.Width || p.Height != m.Height {
		panic(fmt.Sprintf("raster: mask of %d × %d for a plane of %d × %d", m.Width, m.Height, p.Width, p.Height))
	}
}

func newGrid(width, height, cell int) *Grid {
	g := &Grid{CellPx: cell, Columns: (width + cell - 1) / cell, Rows: (height + cell - 1) / cell}
	n := g.Columns * g.Rows
	g.Level, g.Noise = make([]float64, n), make([]float64, n)
	g.Inside, g.Valid, g.Filled = make([]int, n), make([]int, n), make([]bool, n)
	return g
}

func (g *Grid) measure(src *Plane, mask, bad *Mask, s GridSettings) {
	least := max(16, int(s.MinShare*float64(g.CellPx*g.CellPx)))
	values := make([]float32, 0, g.CellPx*g.CellPx)
	var c clipper
	for i := range g.Level {
		values, g.Inside[i] = g.values(values[:0], src, mask, bad, i)
		g.Valid[i] = len(values)
		g.Filled[i] = len(values) < least
		if !g.Filled[i] {
			g.Level[i], g.Noise[i] = c.moments(values, s.ClipSigma, s.FloorDN)
		}
	}
}

// values appends the valid pixels of cell i and counts those in the mask.
func (g *Grid) values(dst []float32, src *Plane, mask, bad *Mask, i int) ([]float32, int) {
	inside := 0
	x0, y0 := i%g.Columns*g.CellPx, i/g.Columns*g.CellPx
	x1, y1 := min(x0+g.CellPx, src.Width), min(y0+g.CellPx, src.Height)
	for y := y0; y < y1; y++ {
		row, in := src.Row(y), mask.Row(y)
		for x := x0; x < x1; x++ {
			if !in[x] {
				continue
			}
			inside++
			if bad == nil || !bad.Bits[y*bad.Width+x] {
				dst = append(dst, row[x])
			}
		}
	}
	return dst, inside
}

// Trusted reports whether what the grid says of cell i was seen: at least half of its
// pixels in the mask are valid, and it or a neighbour was measured.
func (g *Grid) Trusted(i int) bool {
	if g.Inside[i] == 0 || 2*g.Valid[i] < g.Inside[i] {
		return false
	}
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			if j, ok := g.at(i, dx, dy); ok && !g.Filled[j] {
				return true
			}
		}
	}
	return false
}

// at returns the cell dx columns and dy rows from cell i.
func (g *Grid) at(i, dx, dy int) (int, bool) {
	x, y := i%g.Columns+dx, i/g.Columns+dy
	return y*g.Columns + x, x >= 0 && y >= 0 && x < g.Columns && y < g.Rows
}
