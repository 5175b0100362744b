package render

import (
	"math"
	"testing"

	"lapgate/pipeline/raster"
)

// spoiledLight returns the light of a bare unit with one spoiler, or none, in a view.
func spoiledLight(t *testing.T, kind string, value float64, view string) *raster.Plane {
	t.Helper()
	s := bare()
	s.Processes[0].RimDN, s.Processes[0].RimWidthUM = 300, 150
	if kind != "" {
		s.Spoilers = []Spoiler{{Kind: kind, Value: value}}
	}
	r := newRenderer(t, s)
	u := r.Unit(0)
	light, err := r.Light(&u, view)
	if err != nil {
		t.Fatal(err)
	}
	return light
}

// The silhouette's dark area is the part's: π/4·d² for a whole one, less the segment
// R²·acos((R−h)/R) − (R−h)·√(2Rh−h²) where a piece of depth h is broken off (closed form).
func TestSilhouetteArea(t *testing.T) {
	area := func(kind string, value float64) float64 {
		sum := 0.0
		for y, p := 30, spoiledLight(t, kind, value, "back"); y < p.Height; y++ {
			for x := range p.Width {
				sum += 1 - float64(p.At(x, y))/3000
			}
		}
		return sum
	}
	cut := segment(100, 30-0.5-19.5) // rows above 30 are left out: the patch stands there
	near(t, "whole", area("", 0), math.Pi*1e4-cut, 15)
	near(t, "small", area(SpoilDiameter, 15), math.Pi*75*75, 15)
	whole := area(SpoilBroken, 4)
	low, high := math.Pi*1e4-cut-segment(100, 40), math.Pi*1e4-segment(100, 40)
	if whole < low-15 || whole > high+15 {
		t.Errorf("broken: got %g px², want %g to %g", whole, low, high)
	}
}

func segment(r, h float64) float64 {
	return r*r*math.Acos((r-h)/r) - (r-h)*math.Sqrt(2*r*h-h*h)
}

func TestSpoilersOfTheSurface(t *testing.T) {
	clean := spoiledLight(t, "", 0, "ring")
	for kind, value := range map[string]float64{SpoilMatt: 600, SpoilFingerprint: 80, SpoilQuarterStain: 90, SpoilOilFilm: 30} {
		dirty := spoiledLight(t, kind, value, "ring")
		changed, n, outside := 0.0, 0.0, 0.0
		for y := range clean.Height {
			for x := range clean.Width {
				d := math.Abs(float64(dirty.At(x, y) - clean.At(x, y)))
				switch r := math.Hypot(float64(x)-149.5, float64(y)-119.5); {
				case r < 95:
					n++
					if d > 5 {
						changed++
					}
				case r > 108:
					outside = max(outside, d)
				}
			}
		}
		share := changed / n
		low := map[string]float64{SpoilMatt: 0.99, SpoilFingerprint: 0.1, SpoilQuarterStain: 0.2, SpoilOilFilm: 0.7}[kind]
		high := map[string]float64{SpoilMatt: 1, SpoilFingerprint: 0.4, SpoilQuarterStain: 0.45, SpoilOilFilm: 1}[kind]
		if share < low || share > high || outside > 0.01 {
			t.Errorf("%s: changes %.2f of the part and %g DN beside it, want %g to %g and 0", kind, share, outside, low, high)
		}
	}
}

// The steps from pixel to pixel over the edge spread as the Gaussian does, with 1/12 px²
// more for the pixel and 1/12 for the step (variance of a box).
func TestDefocusWidensTheEdge(t *testing.T) {
	for _, sigma := range []float64{0.8, 2, 5} {
		row := spoiledLight(t, SpoilDefocus, sigma, "back").Row(119)
		sum, mean, square := 0.0, 0.0, 0.0
		for x := 200; x < 299; x++ {
			d, at := float64(row[x+1]-row[x])/3000, float64(x)+0.5
			sum, mean, square = sum+d, mean+d*at, square+d*at*at
		}
		mean /= sum
		near(t, "step", sum, 1, 1e-3)
		near(t, "edge", mean, 249.5, 0.07)
		near(t, "variance", square/sum-mean*mean, sigma*sigma+2.0/12, 0.02*sigma*sigma+0.02)
	}
}

func TestBlackBand(t *testing.T) {
	s := bare()
	s.Spoilers = []Spoiler{{Kind: SpoilBlackBand, Value: 0.1, View: "bar"}}
	r := newRenderer(t, s)
	u := r.Unit(0)
	for view, want := range map[string]int{"ring": 0, "bar": 24} {
		f, err := r.Frame(&u, view)
		if err != nil {
			t.Fatal(err)
		}
		p, _ := f.Raw.Plane()
		black := 0
		for y := range p.Height {
			if meanOf(p, 0, p.Width, y, y+1) == 0 {
				black++
			}
		}
		if black != want {
			t.Errorf("%s: %d black rows, want %d", view, black, want)
		}
	}
}

// Concentric lay has the stated root mean square, dimmed by the blur; under the bar it
// fades where the radius is across the light.
func TestLay(t *testing.T) {
	s := bare()
	s.Camera.BlurPx = 0.5
	s.Processes[0].Lay = Lay{Pattern: LayConcentric, PeriodUM: 800, AmplitudeDN: Distribution{Value: 20}}
	r := newRenderer(t, s)
	rms := func(view string, x0, x1, y0, y1 int) float64 {
		square, n := 0.0, 0.0
		for i := range 8 {
			u := r.Unit(i)
			p, err := r.Light(&u, view)
			if err != nil {
				t.Fatal(err)
			}
			mean := meanOf(p, x0, x1, y0, y1)
			for y := y0; y < y1; y++ {
				for x := x0; x < x1; x++ {
					d := float64(p.At(x, y)) - mean
					square, n = square+d*d, n+1
				}
			}
		}
		return math.Sqrt(square / n)
	}
	dimmed := 20 * math.Exp(-2*math.Pi*math.Pi*0.25/64)
	near(t, "ring", rms("ring", 70, 230, 60, 180), dimmed, 0.15*dimmed)
	// light from 30°: the radius to the first place is along it, to the second across
	sin, cos := math.Sincos(30 * math.Pi / 180)
	at := func(dx, dy float64) float64 {
		x, y := int(149.5+70*dx), int(119.5+70*dy)
		return rms("bar", x-9, x+9, y-9, y+9)
	}
	if along, across := at(cos, sin), at(-sin, cos); across > 0.3*along {
		t.Errorf("under the bar: %g DN along the light, %g across, want less than a third", along, across)
	}
}
