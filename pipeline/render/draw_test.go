package render

import (
	"math"
	"testing"

	"lapgate/pipeline"
)

// moments returns sum, centroid and the angle of the long axis of a patch.
func (p *patch) moments() (sum, x, y, angleDeg float64) {
	for i, v := range p.pix {
		px, py := float64(p.x0+i%p.w), float64(p.y0+i/p.w)
		sum, x, y = sum+float64(v), x+float64(v)*px, y+float64(v)*py
	}
	x, y = x/sum, y/sum
	var xx, xy, yy float64
	for i, v := range p.pix {
		dx, dy := float64(p.x0+i%p.w)-x, float64(p.y0+i/p.w)-y
		xx, xy, yy = xx+float64(v)*dx*dx, xy+float64(v)*dx*dy, yy+float64(v)*dy*dy
	}
	return sum, x, y, math.Atan2(2*xy, xx-yy) / 2 * 180 / math.Pi
}

// A disc of diameter d has the area π d²/4 (closed form), wherever it lies between
// pixels, and blur keeps area and centroid.
func TestDiscAreaAndCentroid(t *testing.T) {
	r := stream(3, "disc test")
	for range 60 {
		d := 2 * math.Pow(15, r.Float64())
		x, y := 40+r.Float64(), 40+r.Float64()
		for _, sigma := range []float64{0, 0.7, 1.4} {
			p := disc(x, y, d/2, sigma)
			sum, cx, cy, _ := p.moments()
			want := math.Pi * d * d / 4
			near(t, "area", sum, want, 0.002*want)
			if sigma > 0 { // the pixels of a sharp disc do not hold its centroid
				near(t, "x", cx, x, 0.003)
				near(t, "y", cy, y, 0.003)
			}
		}
	}
}

func disc(x, y, radius, sigma float64) *patch {
	p := newPatch(x, y, radius, blurReach*sigma+2)
	p.drawnFine(sigma, func(fine *patch) { fine.drawDisc(x, y, radius, 1) })
	return p
}

// The middle of a blurred disc is 1 − exp(−r²/2σ²) (closed form of a disc seen through a
// Gaussian); the pixel adds 1/12 to σ².
func TestBlurredDiscPeak(t *testing.T) {
	_, peak, x, y := disc(30, 30, 2, 1.5).extreme(100, 100)
	near(t, "peak", peak, 1-math.Exp(-4/(2*(1.5*1.5+1.0/12))), 0.004)
	if x != 30 || y != 30 {
		t.Errorf("peak at (%d, %d), want (30, 30)", x, y)
	}
}

// A stroke sums to length × width whatever its bend (closed form), and lies along its angle.
func TestArcFluxAndAngle(t *testing.T) {
	for _, bendPerMM := range []float64{0, 0.02, -0.05, 1.2, -2} {
		for _, angle := range []float64{0, 35, 90, -62} {
			st := stageFor(t, "ring")
			o := Object{Kind: pipeline.Scratch, UUM: 130, VUM: -240, LengthUM: 2500, WidthUM: 90, AngleDeg: angle, BendPerMM: bendPerMM, BrightnessDN: 2}
			sum, x, y, got := st.patchOf(o).moments()
			near(t, "flux", sum, 2*25*0.9, 0.005*45)
			if math.Abs(bendPerMM) < 0.1 {
				near(t, "angle", foldDeg(got-angle), 0, 0.3)
			}
			if bendPerMM == 0 {
				wantX, wantY := st.geometry.ToPixel(o.UUM, o.VUM)
				near(t, "x", x, wantX, 0.02)
				near(t, "y", y, wantY, 0.02)
			}
		}
	}
}

func stageFor(t *testing.T, view string) stage {
	r := newRenderer(t, bare())
	u := r.Unit(0)
	i, err := r.view(view)
	if err != nil {
		t.Fatal(err)
	}
	return r.stageOf(&u, r.scene.Views[i])
}

func TestGrainHasTheAreaOfItsCircle(t *testing.T) {
	st := stageFor(t, "ring")
	for seed := range uint64(10) {
		o := Object{Kind: pipeline.Particle, DiameterUM: 1200, BrightnessDN: 1, shape: seed}
		sum, _, _, _ := st.patchOf(o).moments()
		near(t, "area", sum, math.Pi*36, 0.01*math.Pi*36)
	}
}

// In the silhouette a chip is a notch: it lets light through as deep as its width says,
// and nothing else on the part does.
func TestChipDepthInSilhouette(t *testing.T) {
	s := bare()
	s.Camera.BlurPx = 0
	r := newRenderer(t, s)
	for seed := range uint64(6) {
		u := r.Unit(0)
		u.Objects = []Object{{Kind: pipeline.EdgeChip, UUM: 9500, WidthUM: 1200, LengthUM: 2400, shape: seed},
			{Kind: pipeline.Dig, DiameterUM: 900, BrightnessDN: 500}}
		light, err := r.Light(&u, "back")
		if err != nil {
			t.Fatal(err)
		}
		deepest := 0.0
		cx, cy := 149.5, 119.5
		for y := range light.Height {
			for x := range light.Width {
				if d := 100 - math.Hypot(float64(x)-cx, float64(y)-cy); d > 1.5 && light.At(x, y) > 1500 {
					deepest = max(deepest, d)
				}
			}
		}
		near(t, "depth in px", deepest, 12, 1)
	}
}
