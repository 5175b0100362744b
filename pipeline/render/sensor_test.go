package render

import (
	"bytes"
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func meanOf(p *raster.Plane, x0, x1, y0, y1 int) float64 {
	sum := 0.0
	for y := y0; y < y1; y++ {
		for x := x0; x < x1; x++ {
			sum += float64(p.At(x, y))
		}
	}
	return sum / float64((x1-x0)*(y1-y0))
}

// Photon transfer (EMVA Standard 1288, linear model): half the variance of the difference
// of two frames is K·(mean − dark) + (K·σ_d)² + 1/12, the last for rounding. The fixed
// pattern falls out of the difference.
func TestPhotonTransfer(t *testing.T) {
	s := bare()
	s.Camera.ResponseSpread, s.Camera.DarkSpreadDN = 0.02, 3
	for _, level := range []float64{0, 40, 300, 1200, 3000} {
		s.Views[0].ResponseDN = level
		r := newRenderer(t, s)
		a, b := calibrationPlane(t, r, FrameResponse, 0), calibrationPlane(t, r, FrameResponse, 1)
		sum, square, n := 0.0, 0.0, float64(len(a.Pix))
		for i, v := range a.Pix {
			d := float64(v - b.Pix[i])
			sum, square = sum+float64(v), square+d*d
		}
		near(t, "mean", sum/n, 50+level, 0.6)
		want := 0.5*level + 9 + 1.0/12
		near(t, "variance", square/n/2, want, 4*want*math.Sqrt(2/n)) // 4 standard errors of a variance
	}
}

func calibrationPlane(t *testing.T, r *Renderer, kind string, n int) *raster.Plane {
	t.Helper()
	f, err := r.CalibrationFrame(kind, "ring", n)
	if err != nil {
		t.Fatal(err)
	}
	p, err := f.Raw.Plane()
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// Hot and dead pixels and the gain pattern stay where they are in all frames.
func TestFixedPattern(t *testing.T) {
	s := bare()
	s.Camera.HotPixels, s.Camera.HotPixelDN, s.Camera.DeadPixels = 5, Distribution{Value: 900}, 4
	r := newRenderer(t, s)
	for n := range 2 {
		hot, dead := 0, 0
		dark, response := calibrationPlane(t, r, FrameDark, n), calibrationPlane(t, r, FrameResponse, n)
		for i := range dark.Pix {
			if dark.Pix[i] > 800 {
				hot++
			}
			if response.Pix[i] < 100 {
				dead++
			}
		}
		if hot != 5 || dead != 4 {
			t.Errorf("frame %d: %d hot and %d dead pixels, want 5 and 4", n, hot, dead)
		}
	}
}

func TestStrayFrameHasNoPart(t *testing.T) {
	s := bare()
	s.Views[0].StrayDN = 200
	p := calibrationPlane(t, newRenderer(t, s), FrameStray, 0)
	near(t, "left", meanOf(p, 0, 3, 100, 240), 50+1.3*200, 2.5)
	near(t, "right", meanOf(p, 297, 300, 100, 240), 50+0.7*200, 2.5)
	near(t, "middle", meanOf(p, 140, 160, 110, 130), 50+200, 2.5)
}

func TestSaturationAndFormats(t *testing.T) {
	for _, format := range raster.PixelFormats() {
		s := bare()
		s.Camera.PixelFormat = format.String()
		s.Views[0].ResponseDN = 3 * float64(format.MaxCount())
		if s.Views[0].ResponseDN > 1e5 {
			s.Views[0].ResponseDN = 1e5
		}
		p := calibrationPlane(t, newRenderer(t, s), FrameResponse, 0)
		near(t, format.String(), meanOf(p, 0, 300, 0, 240), float64(format.MaxCount()), 0.001)
	}
}

// The same scene gives the same bytes in any order and from another Renderer; a second
// showing of a unit does not.
func TestFramesAreReproducible(t *testing.T) {
	s := bare()
	s.Processes[0].Populations = []Population{{Kind: pipeline.Dig, PerUnit: 3, SizeUM: Distribution{Value: 500}, BrightnessDN: Distribution{Value: 200}}}
	s.Part.MaxShiftPx, s.Part.Turned = 5, true
	first, second := newRenderer(t, s), newRenderer(t, s)
	a := shoot(t, first, first.Unit(5))
	shoot(t, second, second.Unit(2))
	b := shoot(t, second, second.Unit(5))
	again := shoot(t, first, first.Showing(5, 2))
	for i := range a {
		if !bytes.Equal(a[i].Frames[0].Raw.Data, b[i].Frames[0].Raw.Data) {
			t.Errorf("view %s differs between two runs", a[i].Name)
		}
		if bytes.Equal(a[i].Frames[0].Raw.Data, again[i].Frames[0].Raw.Data) {
			t.Errorf("view %s: a second showing has the same pixels", a[i].Name)
		}
		if _, err := pipeline.NewFrame(a[i].Frames[0].Header, a[i].Frames[0].Raw.Data); err != nil {
			t.Errorf("view %s: %v", a[i].Name, err)
		}
	}
}

func shoot(t *testing.T, r *Renderer, u Unit) []pipeline.View {
	t.Helper()
	views, _, err := r.Shoot(u)
	if err != nil {
		t.Fatal(err)
	}
	return views
}
