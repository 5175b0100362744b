package lines

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline/raster"
)

// finderIn searches all of a picture in full resolution.
func finderIn(t *testing.T, p *raster.Plane) *finder {
	t.Helper()
	w, err := newWork(p.Width, p.Height, 1)
	if err != nil {
		t.Fatal(err)
	}
	w.load(p, Whole(p.Width, p.Height).Spans(), nil, false)
	return &finder{work: w, weights: w.weights, plane: p, region: newBorder(Whole(p.Width, p.Height), p.Width, p.Height)}
}

// A sum along a stretch is that of what its positions add, taken one at a time, where pixels
// do not count, too.
func TestSumIsThatOfProfile(t *testing.T) {
	p, r := noise(400, 300, 3), rand.New(rand.NewPCG(3, 3))
	for i := range p.Pix {
		if r.IntN(9) == 0 {
			p.Pix[i] = float32(math.NaN())
		}
	}
	f := finderIn(t, p)
	for i := range 400 {
		k := stretch{axis: i % 2, a: r.IntN(100), ca: 300 * r.Float64(), cb: 300 * r.Float64()}
		k.b = k.a + r.IntN(150)
		var want total
		for _, one := range f.profile(k) {
			want = want.plus(one)
		}
		got := f.sum(k)
		if math.Abs(got.sum-want.sum) > 1e-9 || math.Abs(got.weight-want.weight) > 1e-9 {
			t.Fatalf("%+v: got %v, want %v", k, got, want)
		}
	}
}

// The part that stands out most is the line that was drawn, on white noise and where sums
// scatter more the longer they are; and no part looked at by the way stands out more.
func TestPart(t *testing.T) {
	p := noise(500, 500, 4)
	draw(p, 100, 120, 220, 330, 1, 2)
	f := finderIn(t, p)
	all := stretch{axis: 0, a: 20, b: 450, ca: 100 - 100*120./210, cb: 100 + 330*120./210}
	v := f.profile(all)
	for _, noise := range []scatter{{1, 1, 1}, {1.3, 1.2, 1.1}} {
		first, last, ok := f.part(all, 1, noise)
		if !ok || math.Abs(float64(first-100)) > 4 || math.Abs(float64(last-309)) > 4 {
			t.Fatalf("%v: got %d to %d, want 100 to 309", noise, first, last)
		}
		value := func(i, j int) float64 {
			var all total
			for _, one := range v[i : j+1] {
				all = all.plus(one)
			}
			return all.sigmas(1) / math.Sqrt(noise.over(float64(j-i+1)))
		}
		for d := -6; d <= 6; d++ {
			if value(first+d, last) > value(first, last)+1e-9 || value(first, last+d) > value(first, last)+1e-9 {
				t.Errorf("%v: an end moved by %d stands out more", noise, d)
			}
		}
	}
	if _, _, ok := f.part(all.resized(20, 30), 1, scatter{1, 1, 1}); ok {
		t.Error("a part of 11 positions was found")
	}
}
