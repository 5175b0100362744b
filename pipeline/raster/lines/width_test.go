package lines

import (
	"math"
	"slices"
	"testing"

	"lapgate/pipeline/raster"
)

// drawBlurred adds an arc (radius 0: a straight line) of a band of some width through a
// blur of 0.7 px and the pixels' own, about the middle of a picture of 480 × 480 px.
func drawBlurred(p *raster.Plane, angle, radius, length, width, height, blur float64) {
	blur = math.Hypot(blur, math.Sqrt(1./12))
	sin, cos := math.Sincos(angle)
	for i := range p.Pix {
		x, y := float64(i%p.Stride)-240.3, float64(i/p.Stride)-239.6
		s, o := x*cos+y*sin, y*cos-x*sin
		if radius > 0 {
			d := math.Hypot(s, o+radius)
			s, o = radius*math.Atan2(s, o+radius), d-radius
		}
		if math.Abs(o) < width/2+5 && math.Abs(s) < length/2+5 {
			k := 1 / (math.Sqrt2 * blur)
			band := 0.5 * (math.Erf((o+width/2)*k) - math.Erf((o-width/2)*k))
			p.Pix[i] += float32(height * band * 0.5 * (math.Erf((s+length/2)*k) - math.Erf((s-length/2)*k)))
		}
	}
}

// Widths, heights and lengths of straight and bent scratches: the errors of nine in ten,
// against the band drawn through the blur.
func TestWidthOfBlurredScratches(t *testing.T) {
	for _, c := range []struct{ peak, width, height, length float64 }{{1, 0.6, 0.3, 20}, {2, 0.4, 0.2, 22}, {10, 0.17, 0.1, 18}} {
		for _, radius := range []float64{0, 1000} {
			var wide, high, long []float64
			for i := range 18 {
				width := []float64{0.5, 1, 2, 3, 5, 6}[i%6]
				want := shape{width: width, blur: math.Hypot(0.7, math.Sqrt(pixelVariance))}
				p := noise(480, 480, uint64(8000+i))
				drawBlurred(p, 2*math.Pi*float64(i)/18+0.1, radius, 260, width, c.peak/want.value(0), 0.7)
				l := find(t, p, nil)
				if len(l) == 0 {
					t.Errorf("peak %g, radius %g, width %g: not found", c.peak, radius, width)
					continue
				}
				wide = append(wide, math.Abs(l[0].Width-want.fullWidth()))
				high = append(high, math.Abs(l[0].Contrast/c.peak-1))
				if radius == 0 || c.peak > 1 { // one as faint as the noise is not followed along all of its bend
					long = append(long, math.Abs(l[0].Length-260))
				}
			}
			for _, v := range []struct {
				name string
				off  []float64
				most float64
			}{{"width, px", wide, c.width}, {"height, share", high, c.height}, {"length, px", long, c.length}} {
				if len(v.off) == 0 {
					continue
				}
				slices.Sort(v.off)
				if at := v.off[len(v.off)*9/10-1]; at > v.most {
					t.Errorf("peak %g, radius %g: %s: off by %.2f, want at most %.2f", c.peak, radius, v.name, at, v.most)
				}
			}
		}
	}
}

// Against math.Erf.
func TestErf(t *testing.T) {
	for x := -6.; x < 6; x += 0.0007 {
		if d := math.Abs(erf(x) - math.Erf(x)); d > 3e-9 {
			t.Fatalf("erf(%g) is %g off", x, d)
		}
	}
}
