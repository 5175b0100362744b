package lines

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline/raster"
)

// addSpot adds a disc of some diameter through a blur of 0.7 px, its edge soft.
func addSpot(p *raster.Plane, cx, cy, diameter, height float64) {
	reach := diameter/2 + 4
	for y := max(int(cy-reach), 0); y <= min(int(cy+reach), p.Height-1); y++ {
		for x := max(int(cx-reach), 0); x <= min(int(cx+reach), p.Width-1); x++ {
			d := math.Hypot(float64(x)-cx, float64(y)-cy)
			p.Pix[y*p.Stride+x] += float32(height / 2 * math.Erfc((d-diameter/2)/(0.76*math.Sqrt2)))
		}
	}
}

// chain draws n spots along a line at random spacing and of random size and brightness,
// not quite in line; sign −1 draws dark ones.
func chain(p *raster.Plane, r *rand.Rand, n int, sign float64) {
	angle, at := 2*math.Pi*r.Float64(), 0.
	sin, cos := math.Sincos(angle)
	spacing := 8 * math.Pow(10, r.Float64()) // 8 to 80 px
	most := spacing * 1.5 * float64(n)
	x, y := 240-most/2*cos, 240-most/2*sin
	for range n {
		off := 1.5 * (2*r.Float64() - 1)
		addSpot(p, x+at*cos-off*sin, y+at*sin+off*cos, 1+5*r.Float64()*r.Float64(), sign*4*math.Pow(40, r.Float64()))
		at += spacing * (0.5 + r.Float64())
	}
}

// Two to eight digs in a row at any spacing make no line: of 240 rows none does in full
// resolution. In half resolution some do of those whose digs touch.
func TestRandomChainsAreNoLines(t *testing.T) {
	for half, most := range map[bool]int{false: 0, true: 6} {
		found := 0
		for _, n := range []int{2, 3, 5, 8} {
			for i := range 60 {
				r := rand.New(rand.NewPCG(uint64(i), uint64(n)))
				p := noise(480, 480, uint64(7000+100*n+i))
				chain(p, r, n, float64(1-2*(i%2)))
				found += len(find(t, p, func(s *Settings) { s.Half, s.Polarity = half, Both }))
			}
		}
		if found > most {
			t.Errorf("half %v: %d lines in 240 rows of digs, want at most %d", half, found, most)
		}
	}
}

// A scratch with two digs on it or beside it, and one with gaps, come out as what they are.
func TestScratchWithDigs(t *testing.T) {
	found, whole := 0, 0
	const trials = 60
	for i := range trials {
		r := rand.New(rand.NewPCG(uint64(i), 31))
		p := noise(480, 480, uint64(6000+i))
		angle := 2 * math.Pi * r.Float64()
		sin, cos := math.Sincos(angle)
		parts := [][2]float64{{-130, 130}}
		if i%3 == 0 {
			parts = [][2]float64{{-130, -60}, {-35, 40}, {60, 130}}
		}
		for _, part := range parts {
			draw(p, 240+part[0]*cos, 240+part[0]*sin, 240+part[1]*cos, 240+part[1]*sin, 1, 1.4)
		}
		for range 2 {
			at, beside := 240*r.Float64()-120, 8*r.Float64()-4
			addSpot(p, 240+at*cos-beside*sin, 240+at*sin+beside*cos, 2+3*r.Float64(), 10+60*r.Float64())
		}
		g := segment{240 - 130*cos, 240 - 130*sin, 240 + 130*cos, 240 + 130*sin}
		for _, l := range find(t, p, nil) {
			if g.matches(l) {
				found++
				if math.Abs(l.Length-260) < 20 && l.Width < 2.2 && l.Contrast < 3 {
					whole++
				}
			}
		}
	}
	if found < trials-1 || found > trials || whole < trials*9/10 {
		t.Errorf("%d of %d found, %d with their measures", found, trials, whole)
	}
}
