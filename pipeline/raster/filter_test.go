package raster

import (
	"math"
	"math/rand/v2"
	"testing"
)

// slowFilter is the definition of MatchedFilter, pixel by pixel.
func slowFilter(src *Plane, mask *Mask, x, y int) float64 {
	if !mask.At(x, y) {
		return 0
	}
	w := [5]float64{1. / 16, 4. / 16, 6. / 16, 4. / 16, 1. / 16}
	sum, squares := 0., 0.
	for dy := -2; dy <= 2; dy++ {
		for dx := -2; dx <= 2; dx++ {
			if mask.At(x+dx, y+dy) {
				k := w[dx+2] * w[dy+2]
				sum += k * float64(src.At(x+dx, y+dy))
				squares += k * k
			}
		}
	}
	return sum * MatchedGain / math.Sqrt(squares)
}

func TestMatchedFilterEqualsItsDefinition(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for _, size := range [][2]int{{1, 1}, {3, 2}, {4, 9}, {5, 5}, {23, 17}} {
		p := noisy(size[0], size[1], 5, 3, 9)
		mask := NewMask(size[0], size[1])
		for i := range mask.Bits {
			mask.Bits[i] = random.Float64() < 0.9
		}
		dst := NewPlane(size[0], size[1])
		MatchedFilter(dst, p, mask)
		for i := range dst.Pix {
			if want := slowFilter(p, mask, i%size[0], i/size[0]); math.Abs(float64(dst.Pix[i])-want) > 1e-4 {
				t.Fatalf("%v pixel %d: got %g, want %g", size, i, dst.Pix[i], want)
			}
		}
	}
}

// Binomial weights: Σw² = (70/256)², so white noise comes out with 0.2734 of its sigma,
// at the edge of the mask too.
func TestNoiseGain(t *testing.T) {
	p := noisy(400, 400, 0, 1, 5)
	mask := fullMask(400, 400)
	for i := range mask.Bits {
		mask.Bits[i] = i%400%8 < 3
	}
	for _, m := range []*Mask{fullMask(400, 400), mask} {
		dst := NewPlane(400, 400)
		MatchedFilter(dst, p, m)
		sum, n := 0., 0.
		for i, v := range dst.Pix {
			if m.Bits[i] {
				sum += float64(v * v)
				n++
			}
		}
		if gain := math.Sqrt(sum / n); math.Abs(gain-0.2734) > 0.006 {
			t.Errorf("noise gain %.4f, want 0.2734", gain)
		}
	}
}

func TestErodeADrawnMask(t *testing.T) {
	src := drawn("#####.", "#####.", "#####.", "###.#.", "#####.")
	dst := NewMask(6, 5)
	Erode(dst, src, 1)
	want := drawn("......", ".###..", ".#....", ".#....", "......")
	for i := range want.Bits {
		if dst.Bits[i] != want.Bits[i] {
			t.Fatalf("pixel %d: got %v", i, dst.Bits[i])
		}
	}
}

func TestRatioIsOfTheMask(t *testing.T) {
	a, noise, mask := NewPlane(3, 1), NewPlane(3, 1), NewMask(3, 1)
	copy(a.Pix, []float32{-6, 5, 4})
	copy(noise.Pix, []float32{2, 0, 2})
	mask.Bits[0], mask.Bits[1] = true, true
	Ratio(a, a, noise, mask)
	if a.Pix[0] != -3 || a.Pix[1] != 0 || a.Pix[2] != 0 {
		t.Errorf("got %v, want −3, 0 without noise, 0 outside", a.Pix)
	}
}
