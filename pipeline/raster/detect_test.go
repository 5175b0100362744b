package raster

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// disc is one drawn spot: the pixels' share of a circle, blurred by a Gaussian.
type disc struct{ x, y, diameter, height, blur float64 }

// drawDisc adds a disc to p: 8 × 8 samples a pixel, then a Gaussian of the disc's blur.
func drawDisc(p *Plane, d disc) {
	r := int(d.diameter/2+4*d.blur) + 2
	x0, y0 := int(d.x)-r, int(d.y)-r
	n := 2*r + 1
	cover := make([]float64, n*n)
	for y := range n {
		for x := range n {
			for k := range 64 {
				u := float64(x0+x) + (float64(k%8)-3.5)/8 - d.x
				v := float64(y0+y) + (float64(k/8)-3.5)/8 - d.y
				if u*u+v*v <= d.diameter*d.diameter/4 {
					cover[y*n+x] += 1. / 64
				}
			}
		}
	}
	cover = blurred(blurred(cover, n, d.blur), n, d.blur) // each call blurs along x and transposes
	for y := range n {
		for x := range n {
			if u, v := x0+x, y0+y; u >= 0 && v >= 0 && u < p.Width && v < p.Height {
				p.Pix[v*p.Stride+u] += float32(d.height * cover[y*n+x])
			}
		}
	}
}

func blurred(in []float64, n int, sigma float64) []float64 {
	k := int(4*sigma) + 1
	weights := make([]float64, 2*k+1)
	sum := 0.
	for i := range weights {
		d := float64(i - k)
		weights[i] = math.Exp(-d * d / (2 * sigma * sigma))
		sum += weights[i]
	}
	out := make([]float64, n*n)
	for y := range n {
		for x := range n {
			for i, w := range weights {
				if u := x + i - k; u >= 0 && u < n {
					out[x*n+y] += w / sum * in[y*n+u]
				}
			}
		}
	}
	return out
}

// noisy returns a plane of a level with white normal noise.
func noisy(width, height int, level, sigma float64, seed uint64) *Plane {
	random := rand.New(rand.NewPCG(seed, 7))
	p := NewPlane(width, height)
	for i := range p.Pix {
		p.Pix[i] = float32(level + sigma*random.NormFloat64())
	}
	return p
}

func fullMask(width, height int) *Mask {
	m := NewMask(width, height)
	for i := range m.Bits {
		m.Bits[i] = true
	}
	return m
}

// detect runs the kernels in a row.
func detect(src *Plane, mask, bad *Mask, low, high float32) ([]Blemish, *Grid) {
	g := MeasureGrid(src, mask, bad, DefaultGrid())
	level, noise, tmp := NewPlane(src.Width, src.Height), NewPlane(src.Width, src.Height), NewPlane(src.Width, src.Height)
	g.Interpolate(level, noise)
	signal, snr := NewPlane(src.Width, src.Height), NewPlane(src.Width, src.Height)
	Subtract(signal, src, level)
	MatchedFilter(tmp, signal, mask)
	SNR(snr, tmp, noise)
	blobs := Label(snr, low, high)
	m := NewMeasurer(signal, noise, mask, blobs)
	var out []Blemish
	for i := range blobs {
		out = append(out, m.Measure(i))
	}
	return out, g
}

func nearest(found []Blemish, x, y float64) (Blemish, float64) {
	best, at := math.Inf(1), Blemish{}
	for _, f := range found {
		if d := math.Hypot(f.X-x, f.Y-y); d < best {
			best, at = d, f
		}
	}
	return at, best
}

func mid(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	v = slices.Clone(v)
	slices.Sort(v)
	return v[len(v)/2]
}

// place draws digs of one kind on a grid with random offsets; the height of each is
// contrast sigmas at its brightest pixel.
func place(p *Plane, random *rand.Rand, diameter, blur, contrast, sigma float64) []disc {
	var out []disc
	for y := 64; y+64 <= p.Height; y += 96 {
		for x := 64; x+64 <= p.Width; x += 96 {
			d := disc{float64(x) + random.Float64(), float64(y) + random.Float64(), diameter, 1, blur}
			probe := NewPlane(129, 129)
			centred := d
			centred.x, centred.y = d.x-float64(x-64), d.y-float64(y-64)
			drawDisc(probe, centred)
			d.height = contrast * sigma / float64(slices.Max(probe.Pix))
			drawDisc(p, d)
			out = append(out, d)
		}
	}
	return out
}

// Digs whose brightest pixel is at 8 sigmas or more are found where they are.
func TestDigsAreFoundAndPlaced(t *testing.T) {
	const sigma = 1.6
	found, total := 0, 0
	var miss []float64
	for i, c := range []struct{ diameter, blur, contrast float64 }{
		{1, 0.8, 8}, {3, 1.2, 8}, {6, 1.5, 8}, {12, 1.2, 9}, {2, 1.5, 12}, {40, 1.2, 8}, {20, 0.8, 20}, {4, 1, 16}} {
		random := rand.New(rand.NewPCG(uint64(i), 1))
		p := noisy(640, 640, 20, sigma, uint64(i))
		digs := place(p, random, c.diameter, c.blur, c.contrast, sigma)
		blemishes, _ := detect(p, fullMask(640, 640), nil, 3.5, 6)
		for _, d := range digs {
			total++
			if _, distance := nearest(blemishes, d.x, d.y); distance < 2 {
				found++
				miss = append(miss, distance)
			}
		}
		if len(blemishes) > len(digs) {
			t.Errorf("diameter %g: %d defects, drawn %d", c.diameter, len(blemishes), len(digs))
		}
	}
	if float64(found) < 0.99*float64(total) || mid(miss) > 0.15 {
		t.Errorf("found %d of %d, want 99 %%; median distance %.3f px, want at most 0.15", found, total, mid(miss))
	}
}

// Size is taken at half of the dig's own height: within 10 %, and the same whatever
// the light's power.
func TestDiameterDoesNotFollowTheLight(t *testing.T) {
	const sigma = 1.6
	for _, blur := range []float64{0.8, 1.2, 1.5} {
		for _, diameter := range []float64{6, 8, 12, 24} {
			var median [3]float64
			for i, power := range []float64{0.5, 1, 1.5} {
				random := rand.New(rand.NewPCG(9, uint64(diameter)))
				p := noisy(448, 448, 20*power, sigma, 5)
				digs := place(p, random, diameter, blur, 16*power, sigma)
				blemishes, _ := detect(p, fullMask(448, 448), nil, 3.5, 6)
				var sizes []float64
				for _, d := range digs {
					b, _ := nearest(blemishes, d.x, d.y)
					sizes = append(sizes, b.Diameter)
				}
				median[i] = mid(sizes)
			}
			for i, m := range median {
				if math.Abs(m-diameter) > 0.1*diameter || math.Abs(m-median[1]) > 0.05*diameter {
					t.Errorf("diameter %g, blur %g, power %d: median %.2f px, at full power %.2f", diameter, blur, i, m, median[1])
				}
			}
		}
	}
}

// A scratch is measured along and across itself. A box of 3 px under a Gaussian of 1 px is
// 3.33 px wide at half of its height (from erf).
func TestScratchIsFollowed(t *testing.T) {
	const sigma, width, length, blur = 1.6, 3., 120., 1.
	for _, degrees := range []float64{0, 17, 45, 90, -63} {
		p := noisy(320, 320, 20, sigma, 3)
		sin, cos := math.Sincos(degrees * math.Pi / 180)
		for y := range 320 {
			for x := range 320 {
				dx, dy := float64(x)-160.3, float64(y)-159.8
				a, c := dx*cos+dy*sin, dy*cos-dx*sin
				p.Pix[y*320+x] += float32(20 * box(a, length, blur) * box(c, width, blur))
			}
		}
		found, _ := detect(p, fullMask(320, 320), nil, 3.5, 6)
		if len(found) != 1 || !found[0].Long {
			t.Fatalf("%g°: %d blemishes %+v, want one long", degrees, len(found), found)
		}
		b := found[0]
		turn := math.Mod(b.Angle-degrees+270, 180) - 90
		if math.Abs(b.Length-length) > 3 || math.Abs(b.Width-3.33) > 0.2 || math.Abs(turn) > 0.5 || len(b.Path) < 10 {
			t.Errorf("%g°: length %.1f px, width %.2f px, angle %.2f°, %d points, want %g, 3.33", degrees, b.Length, b.Width, b.Angle, len(b.Path), length)
		}
	}
}

// box is a box of width w blurred by a Gaussian, at x.
func box(x, w, sigma float64) float64 {
	f := func(v float64) float64 { return math.Erf(v/(sigma*math.Sqrt2)) / 2 }
	return f(x+w/2) - f(x-w/2)
}

// White noise, lay marks and a bright rim outside the region are no defects. The chance
// of one in a frame of white noise alone is about 2 million × Q(6)/2 ≈ 0.001.
func TestCleanPartHasNoDefects(t *testing.T) {
	const side = 512
	mask := NewMask(side, side)
	for i := range mask.Bits {
		x, y := float64(i%side)-256, float64(i/side)-256
		mask.Bits[i] = x*x+y*y < 230*230
	}
	for seed := range uint64(8) {
		p := noisy(side, side, 18, 1.6, seed)
		for i := range p.Pix {
			r := math.Hypot(float64(i%side)-256, float64(i/side)-256)
			p.Pix[i] += float32(1.2 * math.Sin(r*2*math.Pi/9)) // concentric lay
			if r > 231 {
				p.Pix[i] += 150
			}
		}
		if found, _ := detect(p, mask, nil, 3.5, 6); len(found) > 0 {
			t.Errorf("seed %d: %d defects, first %+v", seed, len(found), found[0])
		}
	}
}
