package fused

import (
	"math"
	"testing"

	"lapgate/pipeline/raster"
)

// The contrast is that of package raster, to the step of the integers in which counts are
// corrected, and does not depend on the number of bands.
func TestContrastEqualsReference(t *testing.T) {
	for _, format := range []raster.PixelFormat{raster.Mono8, raster.Mono12p, raster.Mono16} {
		s := draw(look{format: format, width: 301, height: 207, noise: 1.5, digs: 4, circle: true, seed: 5})
		c, err := NewCorrection(s.raw.Format, s.raw.Width, s.raw.Height, s.planes)
		if err != nil {
			t.Fatal(err)
		}
		found, err := c.Find(s.raw, s.mask.Spans(), usual())
		if err != nil {
			t.Fatal(err)
		}
		corrected, level, noise := correctedPlane(t, s), raster.NewPlane(301, 207), raster.NewPlane(301, 207)
		found.Grid.Interpolate(level, noise)
		scale := c.scale
		if !c.integer {
			scale = 1000
		}
		for _, bands := range []int{0, 1, 3} {
			got, err := c.Contrast(s.raw, s.mask.Spans(), found.Grid, bands)
			if err != nil {
				t.Fatal(err)
			}
			for i, v := range got.Pix {
				want := 0.
				if s.mask.Bits[i] && !s.planes.Bad.Bits[i] {
					want = float64(corrected.Pix[i]-level.Pix[i]) / float64(noise.Pix[i])
				}
				if math.Abs(float64(v)-want) > 1/(scale*float64(noise.Pix[i]))+1e-3 {
					t.Fatalf("%s at (%d, %d): got %g, want %g", format, i%301, i/301, v, want)
				}
			}
		}
	}
}

func correctedPlane(t *testing.T, s scene) *raster.Plane {
	t.Helper()
	p, err := s.raw.Plane()
	if err != nil {
		t.Fatal(err)
	}
	raster.Subtract(p, p, s.planes.Dark)
	raster.Subtract(p, p, s.planes.Stray)
	for i := range p.Pix {
		p.Pix[i] /= s.planes.Response.Pix[i]
	}
	raster.ReplaceBad(p, s.planes.Bad)
	return p
}

func TestContrastRefusesAnotherGrid(t *testing.T) {
	s := draw(look{format: raster.Mono8, width: 301, height: 207, noise: 1.5, plain: true, seed: 5})
	c, err := NewCorrection(s.raw.Format, 301, 207, s.planes)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := c.Contrast(s.raw, s.mask.Spans(), &raster.Grid{CellPx: 64, Columns: 2, Rows: 2}, 1); err == nil {
		t.Error("a grid of another size was taken")
	}
	if _, err := c.Contrast(raster.NewRaw(raster.Mono8, 10, 10), nil, &raster.Grid{CellPx: 64}, 1); err == nil {
		t.Error("a frame of another size was taken")
	}
}

// BenchmarkContrast is of 12 megapixels, one band.
func BenchmarkContrast(b *testing.B) {
	s := draw(look{format: raster.Mono8, width: 4000, height: 3000, noise: 1.5, seed: 5})
	c, err := NewCorrection(s.raw.Format, 4000, 3000, s.planes)
	if err != nil {
		b.Fatal(err)
	}
	found, err := c.Find(s.raw, s.mask.Spans(), usual())
	if err != nil {
		b.Fatal(err)
	}
	spans := s.mask.Spans()
	for b.Loop() {
		if _, err := c.Contrast(s.raw, spans, found.Grid, 1); err != nil {
			b.Fatal(err)
		}
	}
}
