package lines

import (
	"math"
	"slices"

	"lapgate/pipeline/raster"
)

const profileStep = 0.5 // px from one place across a line to the next

// mostRows is from how many positions along a line its profile is taken at most, evenly spread.
const mostRows = 480

// row is what lies across a line at one position of it.
type row struct {
	s float64   // px along the path
	v []float64 // from −reach to reach by profileStep; NaN where a pixel does not count
}

// rows returns what lies across a path, pixels interpolated along the axis to which they
// run across, at every stride-th position.
func (f *finder) rows(path []raster.Point, sign, reach float64, stride int, shift bend) []row {
	var out []row
	s := 0.
	for i := 1; i < len(path); i++ {
		if k, ok := between(path[i-1], path[i]); ok {
			out = f.rowsOf(out, k, path[i-1], s, sign, reach, stride, shift)
		}
		s += distance(path[i-1], path[i])
	}
	return out
}

func (f *finder) rowsOf(out []row, k stretch, from raster.Point, s, sign, reach float64, stride int, shift bend) []row {
	slope := k.slope()
	across := math.Hypot(1, slope) // px of the axis for each px across
	n, first := 2*int(reach/profileStep)+1, len(out)
	for m := k.a; m <= k.b; m += stride {
		c := k.at(m)
		r := row{s: s + distance(from, k.point(float64(m), c)), v: make([]float64, n)}
		c += across * shift.at(r.s)
		for b := range r.v {
			r.v[b] = sign * f.interpolated(k.axis, m, c+across*(float64(b)*profileStep-reach))
		}
		out = append(out, r)
	}
	if len(out) > first && out[first].s > out[len(out)-1].s {
		slices.Reverse(out[first:])
	}
	return out
}

// interpolated is the plane between two pixels across an axis; NaN where one does not count.
func (f *finder) interpolated(axis, m int, c float64) float64 {
	j := int(math.Floor(c))
	x0, y0, x1, y1 := j, m, j+1, m
	if axis == 1 {
		x0, y0, x1, y1 = m, j, m, j+1
	}
	a, ok0 := f.pixel(x0, y0)
	b, ok1 := f.pixel(x1, y1)
	if !ok0 || !ok1 {
		return math.NaN()
	}
	t := c - float64(j)
	return a*(1-t) + b*t
}

// pixel returns the plane's value where it counts.
func (f *finder) pixel(x, y int) (float64, bool) {
	if !f.region.At(x, y) || f.bad != nil && f.bad.At(x, y) {
		return 0, false
	}
	v := float64(f.plane.At(x, y))
	return v, !math.IsNaN(v) && !math.IsInf(v, 0)
}

// across returns the profile of rows: at each place the mean of the middle half of them, so
// that digs on the line or beside it, over up to a quarter of its length, do not count.
func across(rows []row) []float64 {
	if len(rows) == 0 {
		return nil
	}
	step := (len(rows) + mostRows - 1) / mostRows
	out, column := make([]float64, len(rows[0].v)), make([]float64, 0, len(rows))
	for b := range out {
		column = column[:0]
		for i := 0; i < len(rows); i += step {
			if v := rows[i].v[b]; !math.IsNaN(v) {
				column = append(column, v)
			}
		}
		out[b] = middleMean(column)
	}
	return out
}

// middleMean sorts v and returns the mean of its middle half; 0 for none.
func middleMean(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	slices.Sort(v)
	return mean(v[len(v)/4 : len(v)-len(v)/4])
}

// along returns the middle value of each row.
func along(rows []row) []float64 {
	out := make([]float64, 0, len(rows))
	for _, r := range rows {
		if v := r.v[len(r.v)/2]; !math.IsNaN(v) {
			out = append(out, v)
		}
	}
	return out
}
