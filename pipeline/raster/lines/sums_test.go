package lines

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline/raster"
)

// shift is how far the line of slope t of a strip of n rows lies beside its start in row r:
// the two halves have the slope t/2, and the lower one starts (t + 1)/2 beside (rounded
// down), as Brady 1998 has it. The kernels must sum along these, to the last bit.
func shift(r, t, n int) int {
	if n == 1 {
		return 0
	}
	if r < n/2 {
		return shift(r, t/2, n/2)
	}
	return (t+1)/2 + shift(r-n/2, t/2, n/2)
}

// steps is the value of a pixel in the kernels: odd sixths of a sigma within ±31.
func steps(v float32) int {
	if v != v {
		return 0
	}
	return 2*int(math.Floor(min(max(3*float64(v), -16), 15))) + 1
}

// directSums sums along every line, pixel by pixel.
func directSums(at func(row, x int) int, x0, width int) []int {
	out := make([]int, rows*width)
	for t := range rows {
		for i := range width {
			for r := range rows {
				out[t*width+i] += at(r, x0+i+shift(r, t, rows))
			}
		}
	}
	return out
}

func TestShiftsAreLines(t *testing.T) {
	for s := range rows {
		if shift(0, s, rows) != 0 || shift(rows-1, s, rows) != s {
			t.Fatalf("slope %d: from %d to %d", s, shift(0, s, rows), shift(rows-1, s, rows))
		}
		for r := range rows { // at most log₂(n)/6 beside the true line (Götz and Druckmüller 1996)
			if off := math.Abs(float64(shift(r, s, rows)) - float64(s*r)/(rows-1)); off > 7./6+0.5 {
				t.Errorf("slope %d is %g px off in row %d", s, off, r)
			}
		}
	}
}

func TestKernelEqualsDirectSums(t *testing.T) {
	const width, height = 233, 197
	p := noise(width, height, 3)
	r := rand.New(rand.NewPCG(5, 5))
	bad := raster.NewMask(width, height)
	for range 200 {
		p.Set(r.IntN(width), r.IntN(height), float32([]float64{math.NaN(), math.Inf(1), math.Inf(-1), 100, -7e9, 5e37}[r.IntN(6)]))
		bad.Set(r.IntN(width), r.IntN(height), true)
	}
	var region []raster.Span
	for y := 10; y < 190; y++ {
		region = append(region, raster.Span{Y: y, X0: y / 4, X1: 100 + y/8}, raster.Span{Y: y, X0: 103 + y/8, X1: 230})
	}
	w, err := newWork(width, height, 1)
	if err != nil {
		t.Fatal(err)
	}
	w.load(p, region, bad, false)
	in := raster.NewRows(region, width, height)
	pixel := func(x, y int) int {
		if !in.At(x, y) || bad.At(x, y) || x < 0 || x >= width {
			return 0
		}
		return steps(p.At(x, y))
	}
	for _, c := range []struct {
		axis, first int
		flipped     bool
		x, width    int
	}{{0, 0, false, -127, 320}, {0, 69, true, -127, 320}, {1, 0, true, -100, 150}, {1, 105, false, 50, 140}, {1, 200, false, 0, 10}} {
		at := func(row, x int) int {
			if c.flipped {
				row = rows - 1 - row
			}
			if c.axis == 1 {
				return pixel(c.first+row, x)
			}
			return pixel(x, c.first+row)
		}
		want := directSums(at, c.x, c.width)
		for i, v := range w.sums(c.axis, c.first, c.flipped, c.x, c.width) {
			if int(v) != want[i] {
				t.Fatalf("%+v: slope %d from x = %d: got %d, want %d", c, i/c.width, c.x+i%c.width, v, want[i])
			}
		}
	}
}

// In halves a pixel is made of 2 × 2, and does not count when one of them does not.
func TestHalves(t *testing.T) {
	p := raster.NewPlane(40, 36)
	for i := range p.Pix {
		p.Pix[i] = float32(i%7) / 4
	}
	p.Set(10, 10, float32(math.NaN()))
	bad := raster.NewMask(40, 36)
	bad.Set(21, 20, true)
	w, err := newWork(20, 18, 0.5)
	if err != nil {
		t.Fatal(err)
	}
	w.load(p, Whole(40, 34).Spans(), bad, true)
	got := w.sums(1, 0, false, 0, 18)
	for y := range 18 {
		want := 0
		for x := range 20 {
			if y == 17 || x == 5 && y == 5 || x == 10 && y == 10 {
				continue
			}
			want += steps((p.At(2*x, 2*y) + p.At(2*x+1, 2*y) + p.At(2*x, 2*y+1) + p.At(2*x+1, 2*y+1)) / 2)
		}
		if int(got[y]) != want {
			t.Errorf("row %d: got %d, want %d", y, got[y], want)
		}
	}
}
