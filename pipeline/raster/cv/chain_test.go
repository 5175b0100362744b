//go:build gocv_specific_modules

package cv

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline/raster"
)

// scene returns a Mono8 frame with 16 spots on a 4 × 4 grid 120 px apart, and its maps.
func scene() (raster.Raw, *raster.Plane, *raster.Plane) {
	const side = 512
	random := rand.New(rand.NewPCG(2, 2))
	dark, gain := raster.NewPlane(side, side), raster.NewPlane(side, side)
	counts := make([]uint16, side*side)
	for i := range counts {
		dark.Pix[i], gain.Pix[i] = float32(i%3), 1/(0.9+0.05*float32(i%5))
		x, y := math.Mod(float64(i%side), 128)-64, math.Mod(float64(i/side), 128)-64
		v := 20 + 1.5*random.NormFloat64() + 60*math.Exp(-(x*x+y*y)/8)
		counts[i] = uint16(min(max(math.Round(v/float64(gain.Pix[i])+float64(dark.Pix[i])), 0), 255))
	}
	return raster.Pack(raster.Mono8, counts, side, side), dark, gain
}

func TestTunedChainFindsTheSpots(t *testing.T) {
	raw, dark, gain := scene()
	chain, err := NewTunedChain(dark, gain, raster.NewMask(dark.Width, dark.Height), 3.5, 6)
	if err != nil {
		t.Fatal(err)
	}
	defer chain.Close()
	for range 2 { // the second run meets used Mats
		found, err := chain.Run(raw)
		if err != nil {
			t.Fatal(err)
		}
		if len(found) != 16 {
			t.Fatalf("%d objects, want 16", len(found))
		}
		for _, o := range found {
			x, y := math.Mod(o.X, 128)-64, math.Mod(o.Y, 128)-64
			if math.Hypot(x, y) > 0.2 || math.Abs(o.Flux-60*8*math.Pi) > 150 || o.Length < 6 || o.Length > 9 || o.SNR < 20 {
				t.Errorf("object %+v, want it at a multiple of 128 + 64 with flux %.0f", o, 60*8*math.Pi)
			}
		}
	}
}

func TestTunedChainRefusesOtherFrames(t *testing.T) {
	_, dark, gain := scene()
	chain, err := NewTunedChain(dark, gain, nil, 3.5, 6)
	if err != nil {
		t.Fatal(err)
	}
	defer chain.Close()
	for _, raw := range []raster.Raw{raster.NewRaw(raster.Mono8, 100, 100), raster.NewRaw(raster.Mono12p, 512, 512)} {
		if _, err := chain.Run(raw); err == nil {
			t.Errorf("%s %d × %d passed", raw.Format, raw.Width, raw.Height)
		}
	}
}

func BenchmarkTunedChain(b *testing.B) {
	raw, dark, gain := scene()
	SetThreads(1)
	chain, err := NewTunedChain(dark, gain, nil, 3.5, 6)
	if err != nil {
		b.Fatal(err)
	}
	defer chain.Close()
	for b.Loop() {
		if _, err := chain.Run(raw); err != nil {
			b.Fatal(err)
		}
	}
}
