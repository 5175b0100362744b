package emva

import (
	"math"
	"math/rand/v2"
	"testing"
)

// camera draws frames of the linear model: electrons are normal with variance = mean,
// dark noise is normal, then gain, offset, pattern, rounding and clipping.
type camera struct {
	width, height int
	rnd           *rand.Rand
	gain, offset  []float64 // of each pixel: relative, and in DN
}

func newCamera(width, height int, prnu, dsnuDN float64) *camera {
	c := &camera{width: width, height: height, rnd: rand.New(rand.NewPCG(7, 11))}
	for range width * height {
		c.gain = append(c.gain, 1+prnu*c.rnd.NormFloat64())
		c.offset = append(c.offset, 20+dsnuDN*c.rnd.NormFloat64())
	}
	return c
}

func (c *camera) frame(photons float64) []uint16 {
	out := make([]uint16, len(c.gain))
	for i := range out {
		mean := 0.6 * photons * c.gain[i]
		dn := math.Round(c.offset[i] + 0.25*(mean+math.Sqrt(mean+64)*c.rnd.NormFloat64()))
		out[i] = uint16(max(min(dn, 1023), 0))
	}
	return out
}

func (c *camera) ramp(photons []float64) []Point {
	var out []Point
	dark := Pair(c.frame(0), c.frame(0))
	for _, p := range photons {
		out = append(out, Point{ExposureUS: 10 + p, Photons: p, Bright: Pair(c.frame(p), c.frame(p)), Dark: dark})
	}
	return out
}

// The synthetic camera K = 0.25 DN/e⁻, σ_d = 8 e⁻, η = 0.6 in 10 bits, pairs of a million
// pixels: all figures within 1 % of the model's. The step of 6 300 photons is the last
// whose noise full scale does not clip (mean 965 DN, 3.7 sigmas below it), so the variance
// peaks there.
func TestSyntheticCameraWithinOnePercent(t *testing.T) {
	c := newCamera(1000, 1000, 0.01, 1)
	f, err := Evaluate(c.ramp([]float64{0, 600, 1500, 2500, 3500, 4500, 5500, 6300, 6500, 7200}))
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%+v", f)
	within := func(what string, got, want float64) { t.Helper(); near(t, what, got, want, 0.01*want) }
	within("K", f.GainDNPerE, 0.25)
	within("quantum efficiency", f.Efficiency, 0.6)
	within("responsivity", f.Responsivity, 0.15)
	within("dark noise", f.DarkNoiseE, 8)
	within("threshold", f.ThresholdPhotons, 14.30484)
	if !f.SaturationReached {
		t.Error("saturation not reached")
	}
	// 0.6 · 6 300 = 3 780 e⁻.
	within("saturation", f.SaturationE, 3780)
	within("SNR max", f.SNRMax, math.Sqrt(3780))
	within("dynamic range", f.DynamicRange, 3780/(2.020726/0.25+0.5))
	if f.LinearityLow < -0.5 || f.LinearityHigh > 0.5 {
		t.Errorf("linearity %v to %v %%, the model is straight", f.LinearityLow, f.LinearityHigh)
	}
}

// Pattern of 1 DN in the dark (4 e⁻) and 1 % in the light from stacks of four frames,
// with a lamp that flickers by 2 %.
func TestSyntheticPatternWithinOnePercent(t *testing.T) {
	c := newCamera(600, 500, 0.01, 1)
	dark, bright := NewStack(600, 500), NewStack(600, 500)
	for i := range 4 {
		dark.Add(c.frame(0))
		bright.Add(c.frame(3300 * (1 + 0.02*float64(i%2))))
	}
	d, b := dark.Spatial(), bright.Spatial()
	near(t, "DSNU", DSNU(d.VarianceDN2, 0.25), 4, 0.04)
	near(t, "PRNU", PRNU(b.VarianceDN2, d.VarianceDN2, b.MeanDN, d.MeanDN), 1, 0.01)
	near(t, "PRNU against neighbours", PRNU(b.LocalDN2, d.LocalDN2, b.MeanDN, d.MeanDN), 1, 0.015)
	near(t, "PRNU of pixels", PRNU(b.PixelDN2, d.PixelDN2, b.MeanDN, d.MeanDN), 1, 0.01)
	near(t, "temporal", d.TemporalDN2, 4.08333, 0.04)
}

// s²_y = s²_y.measured − σ²_y.stack/L by hand: frames (1, 5) and (3, 3) have pixel variances
// 2 and 2, no common change, mean image (2, 4) with variance 1, so 1 − 2/2 = 0. Rows and
// columns need at least two of each.
func TestStackVarianceByHand(t *testing.T) {
	s := NewStack(2, 3)
	s.Add([]uint16{1, 5, 1, 5, 1, 5})
	s.Add([]uint16{3, 3, 3, 3, 3, 3})
	got := s.Spatial()
	near(t, "temporal", got.TemporalDN2, 2, 1e-12)
	near(t, "measured", got.MeasuredDN2, 1, 1e-12)
	near(t, "spatial", got.VarianceDN2, 0, 1e-12)
}

// A pattern of columns alone is all column variance, one of rows all row variance.
func TestPatternsSplit(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 2))
	const w, h = 400, 300
	byColumn, byRow := make([]float64, w), make([]float64, h)
	for x := range byColumn {
		byColumn[x] = 6 * rnd.NormFloat64()
	}
	for y := range byRow {
		byRow[y] = 3 * rnd.NormFloat64()
	}
	s := NewStack(w, h)
	for range 2 {
		counts := make([]uint16, w*h)
		for i := range counts {
			counts[i] = uint16(math.Round(500 + byColumn[i%w] + byRow[i/w] + rnd.NormFloat64()))
		}
		s.Add(counts)
	}
	got := s.Spatial()
	column, row := variance(byColumn, average(byColumn)), variance(byRow, average(byRow))
	near(t, "columns", got.ColumnDN2, column, 0.01*column)
	near(t, "rows", got.RowDN2, row, 0.01*row)
	near(t, "pixels", got.PixelDN2, 0, 0.02)
}
