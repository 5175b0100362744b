package raster

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The clipped sigma is not biased by the clipping, and the level follows a slope to the
// frame's edges.
func TestGridOnASlopeWithNoise(t *testing.T) {
	p := noisy(512, 384, 0, 2, 1)
	for i := range p.Pix {
		p.Pix[i] += float32(30 + 0.02*float64(i%512) - 0.01*float64(i/512))
	}
	g := MeasureGrid(p, fullMask(512, 384), nil, DefaultGrid())
	level, noise := NewPlane(512, 384), NewPlane(512, 384)
	g.Interpolate(level, noise)
	worst, sum := 0., 0.
	for i, v := range level.Pix {
		worst = max(worst, math.Abs(float64(v)-(30+0.02*float64(i%512)-0.01*float64(i/512))))
		sum += float64(noise.Pix[i])
	}
	if mean := sum / float64(len(noise.Pix)); worst > 0.25 || math.Abs(mean/2-1) > 0.03 {
		t.Errorf("level off by up to %.3f DN, want 0.25; mean noise %.3f DN, want 2", worst, mean)
	}
}

// Haze with a crest over one cell, 0.7 sigma above the median of the cells around, is
// background: the matched filter would show a level that stays behind as 2.5 sigmas all
// over the crest. A dig that fills a third of a cell with 2 sigmas is none.
func TestGridFollowsHazeAndNoDigs(t *testing.T) {
	const cell = 64
	crest, dig := noisy(7*cell, 7*cell, 20, 1, 5), noisy(7*cell, 7*cell, 20, 1, 5)
	wave := func(p float64) float64 { return math.Cos(2 * math.Pi * (p - 3.5*cell + 0.5) / (3 * cell)) }
	for i := range crest.Pix {
		x, y := float64(i%crest.Width), float64(i/crest.Width)
		crest.Pix[i] += float32(1.4 * wave(x) * wave(y))
		if math.Hypot(x-3.5*cell, y-3.5*cell) < 21 {
			dig.Pix[i] += 2
		}
	}
	const middle = 3*7 + 3
	// The mean of 1.4·cos·cos over the cell: 1.4·(sin(π/3)/(π/3))² = 0.957.
	if off := MeasureGrid(crest, fullMask(7*cell, 7*cell), nil, DefaultGrid()).Level[middle] - 20 - 0.957; math.Abs(off) > 0.1 {
		t.Errorf("the level on the crest is off by %.2f sigma, want it followed", off)
	}
	if off := MeasureGrid(dig, fullMask(7*cell, 7*cell), nil, DefaultGrid()).Level[middle] - 20; math.Abs(off) > 0.1 {
		t.Errorf("the level under the dig is off by %.2f sigma, want that of the cells around", off)
	}
}

// Standard deviation of a normal distribution cut at ±3 and ±2 sigma: 0.986577 and
// 0.879626 (√0.973 34 and √0.773 74, from the formula with φ(3) = 0.004 431 85).
func TestTruncation(t *testing.T) {
	if a, b := truncation(3), truncation(2); math.Abs(a-0.98658) > 1e-5 || math.Abs(b-0.87963) > 1e-5 {
		t.Errorf("got %.6f and %.6f", a, b)
	}
}

func TestClippedMomentsWithAFifthAstray(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 1))
	var v []float32
	for i := range 4096 {
		x := 20 + 1.5*random.NormFloat64()
		if i%5 == 0 {
			x += 100
		}
		v = append(v, float32(x))
	}
	var c clipper
	if mean, sigma := c.moments(v, 3, 0.29); math.Abs(mean-20) > 0.1 || math.Abs(sigma-1.5) > 0.06 {
		t.Errorf("got %.3f ± %.3f, want 20 ± 1.5", mean, sigma)
	}
}

// Lay that is smooth over a few pixels scatters the filtered picture more than white noise of
// the same sigma: the grain factor makes up for it.
func TestGrainFactor(t *testing.T) {
	p := noisy(256, 256, 20, 1, 1)
	for i := range p.Pix {
		p.Pix[i] += float32(1.5 * math.Sin(float64(i%256)*2*math.Pi/12))
	}
	mask := fullMask(256, 256)
	g := MeasureGrid(p, mask, nil, DefaultGrid())
	filtered := NewPlane(256, 256)
	level, noise := NewPlane(256, 256), NewPlane(256, 256)
	g.Interpolate(level, noise)
	signal, snr := NewPlane(256, 256), NewPlane(256, 256)
	Subtract(signal, p, level)
	MatchedFilter(filtered, signal, mask)
	SNR(snr, filtered, noise)
	sum := 0.
	for _, v := range snr.Pix {
		sum += float64(v * v)
	}
	if rms := math.Sqrt(sum / float64(len(snr.Pix))); rms > 1.15 || rms < 0.85 {
		t.Errorf("rms of the snr plane %.3f, want about 1", rms)
	}
}

// Cells without valid pixels take what their neighbours say and are flagged; pixels
// outside the mask never count.
func TestCellsOutsideTheMaskAreFilled(t *testing.T) {
	p := noisy(320, 320, 20, 1, 2)
	mask, bad := NewMask(320, 320), NewMask(320, 320)
	for i := range mask.Bits {
		x, y := i%320, i/320
		mask.Bits[i] = x < 190
		if !mask.Bits[i] {
			p.Pix[i] = 4000
		}
		bad.Bits[i] = x >= 64 && x < 128 && y >= 64 && y < 128
	}
	g := MeasureGrid(p, mask, bad, DefaultGrid())
	for i, level := range g.Level {
		filled := i%5 > 2 || i == 6
		if math.Abs(level-20) > 0.3 || g.Filled[i] != filled {
			t.Errorf("cell %d: level %.2f, filled %v, want 20, %v", i, level, g.Filled[i], filled)
		}
	}
	if g.Trusted(6) || !g.Trusted(7) || g.Trusted(9) {
		t.Error("want the bad cell and the cells without region not trusted")
	}
}

func TestReplaceBad(t *testing.T) {
	p := NewPlane(4, 3)
	copy(p.Pix, []float32{1, 2, 3, 4, 5, 999, 7, 8, 9, 10, 11, 12})
	bad := drawn("....", ".#..", "....")
	ReplaceBad(p, bad)
	if p.At(1, 1) != 6 { // median of 1 2 3 5 7 9 10 11
		t.Errorf("got %g, want 6", p.At(1, 1))
	}
	q := NewPlane(5, 5)
	q.Set(0, 0, 8)
	ReplaceBad(q, drawn(".####", "#####", "#####", "#####", "#####"))
	if q.At(4, 4) != 8 {
		t.Errorf("far from good pixels: got %g, want 8", q.At(4, 4))
	}
}
