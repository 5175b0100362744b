package raster

import (
	"math"
	"math/rand/v2"
	"testing"
)

func allOf(p *Plane) *Mask {
	m := NewMask(p.Width, p.Height)
	for i := range m.Bits {
		m.Bits[i] = true
	}
	return m
}

// A cell's level is the mean of its pixels, whatever small spot lies in it.
func TestCoarseLevelIgnoresSmallSpots(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 1))
	p := NewPlane(64, 48)
	for i := range p.Pix {
		p.Pix[i] = float32(10 + 0.5*random.NormFloat64())
	}
	for y := 20; y < 26; y++ {
		for x := 20; x < 26; x++ {
			p.Set(x, y, 200)
		}
	}
	bad := NewMask(64, 48)
	for y := range 16 {
		for x := range 16 {
			bad.Set(x, y, x < 9)
		}
	}
	c := CoarseLevels(p, allOf(p), bad, 16)
	if c.Valid.At(0, 0) || !c.Valid.At(1, 1) || c.Valid.Count() != 11 {
		t.Errorf("valid %v", c.Valid.Bits)
	}
	for j := range 3 {
		for i := range 4 {
			if c.Valid.At(i, j) && math.Abs(float64(c.Level.At(i, j))-10) > 0.2 {
				t.Errorf("cell (%d, %d): %g", i, j, c.Level.At(i, j))
			}
		}
	}
}

// A surface of second order is fitted exactly though 40 % of the cells stand out.
func TestUnevennessStandsOnTheRest(t *testing.T) {
	c := &Coarse{CellPx: 16, Level: NewPlane(40, 30)}
	c.Valid = allOf(c.Level)
	random := rand.New(rand.NewPCG(1, 2))
	for j := range 30 {
		for i := range 40 {
			x, y := float64(i)/20-1, float64(j)/20-0.75
			v := 10 + 0.5*x - 0.8*y + 0.6*x*x - 0.3*x*y + 0.05*random.NormFloat64()
			if i < 16 {
				v += 12
			}
			c.Level.Set(i, j, float32(v))
		}
	}
	residual, sigma, ok := c.Unevenness(2)
	if !ok {
		t.Fatal("no fit")
	}
	for j := range 30 {
		for i := range 40 {
			want := 0.
			if i < 16 {
				want = 12
			}
			if math.Abs(float64(residual.At(i, j))-want) > 0.4 {
				t.Fatalf("cell (%d, %d): %g, want %g", i, j, residual.At(i, j), want)
			}
		}
	}
	if sigma > 0.15 {
		t.Errorf("sigma %g", sigma)
	}
	few := &Coarse{CellPx: 16, Level: NewPlane(3, 2)}
	few.Valid = allOf(few.Level)
	if _, _, ok := few.Unevenness(2); ok {
		t.Error("six cells gave a surface of six terms")
	}
}
