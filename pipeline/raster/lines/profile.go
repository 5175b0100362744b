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
	values := make([]float64, n*((k.b-k.a)/stride+1))
	buffer := make([]float64, 0, int(2*reach*across)+4)
	for m := k.a; m <= k.b; m += stride {
		c := k.at(m)
		r := row{s: s + distance(from, k.point(float64(m), c)), v: values[:n:n]}
		values = values[n:]
		c += across * (shift.at(r.s) - reach)
		low := int(math.Floor(c))
		buffer = f.pixels(buffer[:0], k.axis, m, low, int(math.Floor(c+2*across*reach))+1)
		for b := range r.v {
			at := c + across*float64(b)*profileStep - float64(low)
			j := min(int(at), len(buffer)-2)
			t := at - float64(j)
			r.v[b] = sign * (buffer[j]*(1-t) + buffer[j+1]*t)
		}
		out = append(out, r)
	}
	if len(out) > first && out[first].s > out[len(out)-1].s {
		slices.Reverse(out[first:])
	}
	return out
}

// pixels appends those from low to high across an axis; NaN where one does not count.
func (f *finder) pixels(v []float64, axis, m, low, high int) []float64 {
	for j := low; j <= high; j++ {
		x, y := j, m
		if axis == 1 {
			x, y = m, j
		}
		one, ok := f.pixel(x, y)
		if !ok {
			one = math.NaN()
		}
		v = append(v, one)
	}
	return v
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

// middleMean reorders v and returns the mean of its middle half; 0 for none.
func middleMean(v []float64) float64 {
	n := len(v)
	if n == 0 {
		return 0
	}
	low, high := n/4, n-n/4
	split(v, low)
	split(v[low:], high-low)
	return mean(v[low:high])
}

// split reorders v so that its first k values are the lowest (Hoare's selection).
func split(v []float64, k int) {
	for low, high := 0, len(v)-1; low < high && k > low && k <= high; {
		pivot, i, j := v[(low+high)/2], low, high
		for i <= j {
			for v[i] < pivot {
				i++
			}
			for v[j] > pivot {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i, j = i+1, j-1
			}
		}
		switch {
		case k <= j:
			high = j
		case k > i:
			low = i
		default:
			return
		}
	}
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
