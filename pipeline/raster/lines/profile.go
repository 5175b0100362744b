package lines

// #cgo noescape ln_middle
// #cgo nocallback ln_middle
// #cgo noescape ln_median
// #cgo nocallback ln_median
// #include "lines.h"
import "C"

import (
	"math"
	"slices"
	"unsafe"

	"lapgate/pipeline/raster"
)

const profileStep = 0.5 // px from one place across a line to the next

// mostRows is from how many positions along a line its profile is taken at most, evenly spread.
const mostRows = 480

// row is what lies across a line at one position of it.
type row struct {
	s float64   // px along the path
	v []float32 // from −reach to reach by profileStep; no number where a pixel does not count
}

// sampled is memory of rows, of pixels and of a column; what it holds is overwritten by the
// next rows.
type sampled struct {
	rows           []row
	values, buffer []float32
	column         []float32
}

// rows returns what lies across a path, pixels interpolated along the axis to which they
// run across, at every position. It is overwritten by the next call.
func (f *finder) rows(path []raster.Point, sign, reach float64, shift bend) []row {
	m := &f.work.sampled
	m.rows, m.values = m.rows[:0], m.values[:0]
	s := 0.
	for i := 1; i < len(path); i++ {
		if k, ok := between(path[i-1], path[i]); ok {
			f.rowsOf(m, k, path[i-1], s, sign, reach, shift)
		}
		s += distance(path[i-1], path[i])
	}
	return m.rows
}

// rowsOf adds those of a straight part of the path that begins at a point, s px along.
func (f *finder) rowsOf(out *sampled, k stretch, from raster.Point, s, sign, reach float64, shift bend) {
	slope := k.slope()
	across := math.Hypot(1, slope) // px of the axis for each px across
	n, first := 2*int(reach/profileStep)+1, len(out.rows)
	values := out.grow(n * (k.b - k.a + 1))
	clear := f.clear(k, across*(reach+shift.most())+2)
	at, ahead := s+distance(from, k.point(float64(k.a), k.ca)), across
	if distance(from, k.point(float64(k.b), k.cb)) < at-s {
		ahead = -across
	}
	for m := k.a; m <= k.b; m++ {
		r := row{s: at + ahead*float64(m-k.a), v: values[:n:n]}
		values = values[n:]
		c := k.ca + slope*float64(m-k.a) + across*(shift.at(r.s)-reach)
		low := int(math.Floor(c))
		f.pixels(out, k.axis, m, low, int(math.Floor(c+2*across*reach))+1, clear)
		interpolate(r.v, out.buffer, float32(c-float64(low)), float32(across*profileStep), float32(sign))
		out.rows = append(out.rows, r)
	}
	if ahead < 0 {
		slices.Reverse(out.rows[first:])
	}
}

// grow returns room for n more values.
func (m *sampled) grow(n int) []float32 {
	used := len(m.values)
	m.values = slices.Grow(m.values, n)[:used+n]
	return m.values[used:]
}

// interpolate takes values between pixels, the first one at a place and the others by steps.
func interpolate(out, pixels []float32, at, step, sign float32) {
	for b := range out {
		x := at + step*float32(b)
		j := min(int(x), len(pixels)-2)
		p := pixels[j : j+2]
		out[b] = sign * (p[0] + (x-float32(j))*(p[1]-p[0]))
	}
}

// pixels fills the buffer with those from low to high across an axis; NaN where one does not
// count. Where all do, clear, nothing is asked.
func (f *finder) pixels(out *sampled, axis, m, low, high int, clear bool) {
	out.buffer = slices.Grow(out.buffer[:0], high-low+1)[:high-low+1]
	if clear {
		at, step := m*f.plane.Stride+low, 1
		if axis == 1 {
			at, step = low*f.plane.Stride+m, f.plane.Stride
		}
		for i := range out.buffer {
			out.buffer[i] = f.plane.Pix[at]
			at += step
		}
		return
	}
	for i := range out.buffer {
		x, y := low+i, m
		if axis == 1 {
			x, y = m, low+i
		}
		out.buffer[i] = float32(math.NaN())
		if f.region.has(x, y) && (f.bad == nil || !f.bad.At(x, y)) {
			out.buffer[i] = f.plane.At(x, y)
		}
	}
}

// clear reports whether all pixels up to some px across from a stretch count.
func (f *finder) clear(k stretch, reach float64) bool {
	low, high := int(math.Floor(min(k.ca, k.cb)-reach)), int(math.Ceil(max(k.ca, k.cb)+reach))
	if k.axis == 0 {
		return f.bad == nil && f.region.holds(low, k.a, high, k.b)
	}
	return f.bad == nil && f.region.holds(k.a, low, k.b, high)
}

// across returns the profile of rows: at each place the mean of the middle half of them, so
// that digs on the line or beside it, over up to a quarter of its length, do not count.
func (m *sampled) across(rows []row) []float64 {
	if len(rows) == 0 {
		return nil
	}
	step := (len(rows) + mostRows - 1) / mostRows
	out := make([]float64, len(rows[0].v))
	for b := range out {
		column := m.column[:0]
		for i := 0; i < len(rows); i += step {
			if v := rows[i].v[b]; v-v == 0 { // neither NaN nor infinite
				column = append(column, v)
			}
		}
		out[b] = middleMean(column)
		m.column = column
	}
	return out
}

// middleMean returns the mean of the middle half of v; 0 for none.
func middleMean(v []float32) float64 {
	return float64(C.ln_middle((*C.float)(unsafe.SliceData(v)), C.int32_t(len(v))))
}

// median returns the upper of the middle two of v, which is not empty.
func median(v []float32) float32 {
	return float32(C.ln_median((*C.float)(unsafe.SliceData(v)), C.int32_t(len(v))))
}

// along returns the middle value of each row.
func along(rows []row) []float64 {
	out := make([]float64, 0, len(rows))
	for _, r := range rows {
		if v := r.v[len(r.v)/2]; v-v == 0 {
			out = append(out, float64(v))
		}
	}
	return out
}
