package render

import (
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// The scene for detection tests must stay hard: enough isolated digs of 2 to 30 px
// between 8 and 100 single-pixel sigmas, and frames on which a plain chain, one threshold
// at 6 standard deviations of the whole frame without calibration and without a region,
// finds at least 3 things that are not there.
func TestDetectScene(t *testing.T) {
	s := readScene(t, "../../testdata/scenes/detect.yaml")
	r := newRenderer(t, s)
	const sample = 8
	isolated := 0
	for i := 0; i < s.Units; i += s.Units / sample {
		u := r.Unit(i)
		f, err := r.Frame(&u, "ring")
		if err != nil {
			t.Fatal(err)
		}
		for _, o := range u.Objects {
			d := o.DiameterUM / s.Camera.UMPerPx
			if k := o.Sightings[0].PeakSigma; o.Isolated && k >= 8 && k <= 105 && d >= 2 && d <= 30 {
				isolated++
			}
		}
		if n := plainFalse(t, f, u); n < 3 {
			t.Errorf("unit %d: a plain threshold finds %d things that are not there, want at least 3", i, n)
		}
	}
	if s.Units < 400 || isolated*s.Units < 2000*sample {
		t.Errorf("%d units with %d isolated digs in %d of them, want 400 and 5 a unit", s.Units, isolated, sample)
	}
}

// plainFalse counts the connected areas above mean + 6 standard deviations of all counts
// whose middle is on no object.
func plainFalse(t *testing.T, f pipeline.Frame, u Unit) int {
	t.Helper()
	p, err := f.Raw.Plane()
	if err != nil {
		t.Fatal(err)
	}
	sum, square, n := 0.0, 0.0, float64(len(p.Pix))
	for _, v := range p.Pix {
		sum, square = sum+float64(v), square+float64(v)*float64(v)
	}
	high := raster.NewMask(p.Width, p.Height)
	for i, v := range p.Pix {
		high.Bits[i] = float64(v) > sum/n+6*math.Sqrt(square/n-sum/n*sum/n)
	}
	found := 0
	for i, in := range high.Bits {
		if in {
			if x, y := takeArea(high, i); !onObject(u, x, y) {
				found++
			}
		}
	}
	return found
}

// takeArea clears the 8-connected area about pixel i and returns its middle.
func takeArea(m *raster.Mask, i int) (x, y float64) {
	open, n := []int{i}, 0.0
	m.Bits[i] = false
	for len(open) > 0 {
		px, py := open[len(open)-1]%m.Width, open[len(open)-1]/m.Width
		open = open[:len(open)-1]
		x, y, n = x+float64(px), y+float64(py), n+1
		for k := range 9 {
			if nx, ny := px+k%3-1, py+k/3-1; m.At(nx, ny) {
				m.Set(nx, ny, false)
				open = append(open, ny*m.Width+nx)
			}
		}
	}
	return x / n, y / n
}

func onObject(u Unit, x, y float64) bool {
	for _, o := range u.Objects {
		s := o.Sightings[0]
		if math.Hypot(s.XPx-x, s.YPx-y) < o.DiameterUM/46+3 {
			return true
		}
	}
	return false
}

func BenchmarkFrame(b *testing.B) {
	r := newRenderer(b, readScene(b, "../../configs/demo/scene.yaml"))
	for i := 0; b.Loop(); i++ {
		u := r.Unit(i % 240)
		if _, err := r.Frame(&u, "ring"); err != nil {
			b.Fatal(err)
		}
	}
}
