package yield

import (
	"math"
	"testing"
)

// Norris: NIST Statistical Reference Datasets, linear regression, y = B0 + B1 x, with
// its certified values (data and values from memory; they agree with each other to nine
// digits, which a slip of memory would not).
func TestTrendOfNorris(t *testing.T) {
	y := []float64{0.1, 338.8, 118.1, 888.0, 9.2, 228.1, 668.5, 998.5, 449.1, 778.9, 559.2, 0.3, 0.1, 778.1, 668.8, 339.3, 448.9, 10.8,
		557.7, 228.3, 998.0, 888.8, 119.6, 0.3, 0.6, 557.6, 339.3, 888.0, 998.5, 778.9, 10.2, 117.6, 228.9, 668.4, 449.2, 0.2}
	x := []float64{0.2, 337.4, 118.2, 884.6, 10.1, 226.5, 666.3, 996.3, 448.6, 777.0, 558.2, 0.4, 0.6, 775.5, 666.9, 338.0, 447.5, 11.6,
		556.0, 228.1, 995.8, 887.6, 120.2, 0.3, 0.3, 556.8, 339.1, 887.2, 999.0, 779.0, 11.1, 118.3, 229.2, 669.1, 448.9, 0.5}
	r, err := NewTrend(x, y)
	if err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string][2]float64{
		"B0": {r.Intercept, -0.262323073774029}, "B1": {r.Slope, 1.00211681802045},
		"error of B0": {r.InterceptError, 0.232818234301152}, "error of B1": {r.SlopeError, 0.429796848199937e-03},
		"residual": {r.Residual, 0.884796396144373},
	} {
		if math.Abs(c[0]/c[1]-1) > 1e-9 {
			t.Errorf("%s: got %.15g, want %.15g", name, c[0], c[1])
		}
	}
}

func TestTrendMovesAndCrosses(t *testing.T) {
	times := []float64{0, 1, 2, 3, 4, 5}
	falling, err := NewTrend(times, []float64{10, 9.1, 7.9, 7.05, 6, 4.95}) // about 10 − t
	if err != nil || !falling.Moves(0.95) {
		t.Fatalf("%+v, %v, want one that moves", falling, err)
	}
	if at, ok := falling.Crossing(5, 2); !ok || math.Abs(at-8) > 0.1 {
		t.Errorf("meets 2 at %v, %v, want about 8", at, ok)
	}
	for _, bound := range []float64{12, 7} { // on its way from it, and past it
		if at, ok := falling.Crossing(5, bound); ok {
			t.Errorf("meets %v at %v, want never", bound, at)
		}
	}
	if level, _ := NewTrend(times, []float64{5, 5.2, 4.9, 5.1, 4.8, 5.05}); level.Moves(0.95) {
		t.Errorf("%+v moves, want noise", level)
	}
	if flat, _ := NewTrend(times, []float64{5, 5, 5, 5, 5, 5}); flat.Moves(0.95) {
		t.Error("a constant moves")
	}
	for _, bad := range [][2][]float64{{{1, 2}, {1, 2}}, {{1, 1, 1}, {1, 2, 3}}, {{1, 2, 3}, {1, math.NaN(), 3}}, {{1, 2, 3}, {1, 2}}} {
		if _, err := NewTrend(bad[0], bad[1]); err == nil {
			t.Errorf("%v: no error", bad)
		}
	}
}

func TestFindApproach(t *testing.T) {
	times, values := []float64{0, 1, 2, 3, 4, 5}, []float64{10, 9.1, 7.9, 7.05, 6, 4.95} // about 10 − t
	two, twelve := 2.0, 12.0
	for name, c := range map[string]struct {
		low, high *float64
		ahead     float64
		ok        bool
	}{
		"soon":     {&two, &twelve, 3.5, true},
		"not soon": {&two, nil, 2.5, false},
		"away":     {nil, &twelve, 100, false},
		"no bound": {nil, nil, 100, false},
	} {
		a, ok, err := FindApproach(times, values, c.low, c.high, c.ahead, 0.95)
		if err != nil || ok != c.ok || ok && (a.Bound != two || math.Abs(a.At-8) > 0.1) {
			t.Errorf("%s: got %+v, %v, %v", name, a, ok, err)
		}
	}
	if _, ok, err := FindApproach(times, []float64{5, 5.2, 4.9, 5.1, 4.8, 5.05}, &two, nil, 100, 0.95); ok || err != nil {
		t.Errorf("noise approaches a bound (%v)", err)
	}
	if _, _, err := FindApproach(times[:2], values[:2], &two, nil, 1, 0.95); err == nil {
		t.Error("two points make a trend")
	}
}
