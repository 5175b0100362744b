package dots

import (
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
)

// small are dots of 0.25 to 1.6 px, brighter per area the smaller they are when the
// exponent is below 2.
func small(exponent float64) (render.Target, [][]float64) {
	sizes := []float64{6, 8, 11, 15, 20, 28, 38}
	target := render.Target{PitchUM: 40 * umPerPx, Columns: 14, Rows: 10, BackgroundDN: 20, BrightnessDN: 2500, ReferenceUM: 20, FluxExponent: exponent}
	var list [][]float64
	for row := range target.Rows {
		var line []float64
		for column := range target.Columns {
			d := sizes[(3*row+column)%len(sizes)]
			line = append(line, d)
			target.DiametersUM = append(target.DiametersUM, d)
		}
		list = append(list, line)
	}
	return target, list
}

func sizingOf(t *testing.T, target render.Target, list [][]float64) (pipeline.Sizing, error) {
	t.Helper()
	p, _ := shoot(t, 3, target, 0)
	placed, err := Assign(Find(p, nil, nil, DefaultThresholds()))
	if err != nil {
		t.Fatal(err)
	}
	known, err := Match(placed, list)
	if err != nil {
		return pipeline.Sizing{}, err
	}
	return FitSizing(known)
}

// The exponent is found whatever it is; fresh dots of other diameters on the same law are
// then sized within 15 % (median) by their flux alone.
func TestSizingFollowsTheTargetsLaw(t *testing.T) {
	for _, exponent := range []float64{1.2, 2} {
		target, list := small(exponent)
		s, err := sizingOf(t, target, list)
		if err != nil {
			t.Fatal(err)
		}
		t.Log(Describe(s))
		if math.Abs(s.Exponent-exponent) > max(3*s.ExponentUncertainty, 0.02) {
			t.Errorf("exponent %v ± %v, want %v", s.Exponent, s.ExponentUncertainty, exponent)
		}
		other := target
		other.DiametersUM, other.ReferenceUM = []float64{7, 9.5, 13, 17, 24, 33}, 20
		p, truth := shoot(t, 4, other, 0)
		var errors []float64
		covered := 0
		for _, d := range Find(p, nil, nil, DefaultThresholds()) {
			got, u, ok := s.DiameterUM(d.Flux, d.SNR)
			if !ok {
				continue
			}
			want := nearestTruth(truth, d)
			errors = append(errors, math.Abs(got/want-1))
			if math.Abs(got-want) <= 2*u {
				covered++
			}
		}
		if len(errors) < 100 || median(errors) > 0.15 {
			t.Errorf("exponent %v: median error %v of %d dots, want 0.15", exponent, median(errors), len(errors))
		}
		if share := float64(covered) / float64(len(errors)); share < 0.85 {
			t.Errorf("exponent %v: %.2f of the dots lie within two standard uncertainties, want about 0.95", exponent, share)
		}
		t.Logf("median error %.3f of %d", median(errors), len(errors))
	}
}

func nearestTruth(truth []render.TargetDot, d Dot) float64 {
	best, size := math.Inf(1), 0.0
	for _, k := range truth {
		if away := math.Hypot(k.XPx-d.X, k.YPx-d.Y); away < best {
			best, size = away, k.DiameterUM
		}
	}
	return size
}

// Dots whose flux scatters by 30 % about the law leave a residual of 30 % / exponent.
func TestScatterBecomesTheResidual(t *testing.T) {
	target, list := small(1.5)
	target.Spread = 0.3
	s, err := sizingOf(t, target, list)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.Residual-0.3/1.5) > 0.04 { // 140 dots tell a spread to 6 %
		t.Errorf("residual %v, want 0.2", s.Residual)
	}
}

// Exact points give the line exactly; the reference is the geometric mean.
func TestFitSizingIsExactOnItsLaw(t *testing.T) {
	var known []Known
	for _, d := range []float64{5, 10, 20, 40} {
		known = append(known, Known{d, 7 * math.Pow(d, 1.37), d})
	}
	s, err := FitSizing(known)
	if err != nil || math.Abs(s.Exponent-1.37) > 1e-12 || s.Residual > 1e-6 || math.Abs(s.ReferenceUM-math.Sqrt(200)) > 1e-9 || s.BlurWidthPx != 5 {
		t.Errorf("got %+v, %v", s, err)
	}
}

func TestWrongListsAreRefused(t *testing.T) {
	target, list := small(2)
	short := list[:7]
	if _, err := sizingOf(t, target, short); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("too few rows: %v", err)
	}
	turned := make([][]float64, len(list))
	for i, row := range list {
		for k := range row {
			turned[len(list)-1-i] = append(turned[len(list)-1-i], row[len(row)-1-k])
		}
	}
	for i := range turned { // falls where the target rises
		for k := range turned[i] {
			turned[i][k] = 228 / list[i][k]
		}
	}
	if _, err := sizingOf(t, target, turned); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("wrong diameters: %v", err)
	}
}
