package yield

import (
	"fmt"
	"math"
	"reflect"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

func samplesOf(t *testing.T, file, count, size string) []Sample {
	t.Helper()
	var samples []Sample
	for _, row := range table(t, file) {
		s := Sample{Count: int(number(t, row[count])), Size: 1}
		if size != "" {
			s.Size = number(t, row[size])
		}
		samples = append(samples, s)
	}
	return samples
}

// without drops samples by their 1-based numbers, as the books set them aside.
func without(samples []Sample, numbers ...int) []Sample {
	var kept []Sample
	for i, s := range samples {
		drop := false
		for _, n := range numbers {
			drop = drop || n == i+1
		}
		if !drop {
			kept = append(kept, s)
		}
	}
	return kept
}

// outside gives the 1-based numbers of the points beyond the limits.
func outside(c Chart) []int {
	numbers := []int{}
	for i, p := range c.Points {
		if p.Outside {
			numbers = append(numbers, i+1)
		}
	}
	return numbers
}

func checkChart(t *testing.T, name string, c Chart, centre, low, high float64, out ...int) {
	t.Helper()
	near(t, name+" centre", c.Centre, centre, 1e-6)
	near(t, name+" lower limit", c.Points[0].Low, low, 5e-6)
	near(t, name+" upper limit", c.Points[0].High, high, 5e-6)
	if got := outside(c); !reflect.DeepEqual(got, append([]int{}, out...)) {
		t.Errorf("%s: outside %v, want %v", name, got, out)
	}
}

// Montgomery's orange-juice cans: limits from 30 samples, then with out-of-control samples set aside, then after the adjustment.
func TestPChartCans(t *testing.T) {
	all := samplesOf(t, "p_chart_cans.csv", "D", "n")
	trial := all[:30]
	checkChart(t, "30 samples", must[Chart](t)(NewChart(ChartP, trial)), 0.2313333, 0.0524275, 0.4102391, 15, 23)
	revised := must[Chart](t)(NewChart(ChartP, without(trial, 15, 23)))
	checkChart(t, "revised limits on all", must[Chart](t)(NewChartAt(ChartP, revised.Centre, trial)), 0.215, 0.0407028, 0.3892972, 15, 21, 23)
	checkChart(t, "27 samples", must[Chart](t)(NewChart(ChartP, without(trial, 15, 21, 23))), 0.208148, 0.035904, 0.380392)
	checkChart(t, "adjusted", must[Chart](t)(NewChart(ChartP, all[30:])), 0.1108333, 0, 0.2440207)
}

// NIST CCP: limits per sample are printed in the file for a centre rounded to 0.0994.
func TestPChartUnequalSizes(t *testing.T) {
	chart := must[Chart](t)(NewChart(ChartP, samplesOf(t, "p_chart_variable_n.csv", "D", "n")))
	near(t, "centre", chart.Centre, 0.09940145, 1e-8)
	for i, row := range table(t, "p_chart_variable_n.csv") {
		p := chart.Points[i]
		near(t, fmt.Sprintf("sample %d low", i+1), p.Low, number(t, row["LCL"]), 1e-5)
		near(t, fmt.Sprintf("sample %d high", i+1), p.High, number(t, row["UCL"]), 1e-5)
		if p.Outside != (row["out"] == "1") {
			t.Errorf("sample %d: outside %v, file says %s", i+1, p.Outside, row["out"])
		}
	}
}

func TestCChartSurfaceDefects(t *testing.T) {
	chart := must[Chart](t)(NewChart(ChartC, samplesOf(t, "c_chart_surface_defects.csv", "defects", "")))
	checkChart(t, "surface", chart, 5.65, 0, 12.780919, 20)
}

func TestCChartCircuitBoards(t *testing.T) {
	all := samplesOf(t, "c_chart_circuit_boards.csv", "defects", "")
	checkChart(t, "26 samples", must[Chart](t)(NewChart(ChartC, all[:26])), 19.846154, 6.481447, 33.210861, 6, 20)
	revised := must[Chart](t)(NewChart(ChartC, without(all[:26], 6, 20)))
	checkChart(t, "24 samples", revised, 19.666667, 6.36253, 32.97080)
	checkChart(t, "next 20", must[Chart](t)(NewChartAt(ChartC, revised.Centre, all[26:])), 19.666667, 6.36253, 32.97080)
}

func TestUChartDyedCloth(t *testing.T) {
	chart := must[Chart](t)(NewChart(ChartU, samplesOf(t, "u_chart_dyed_cloth.csv", "defects", "units_of_50_m2")))
	checkChart(t, "10 units", chart, 1.423256, 0.291474, 2.555038)
	near(t, "12.5 units low", chart.Points[9].Low, 0.410959, 1e-6)
	near(t, "12.5 units high", chart.Points[9].High, 2.435552, 1e-6)
}

func TestUChartWireCracks(t *testing.T) {
	chart := must[Chart](t)(NewChart(ChartU, samplesOf(t, "u_chart_wire_cracks.csv", "defects", "length_m")))
	checkChart(t, "2 m", chart, 2.118919, 0, 5.206820)
	near(t, "2.25 m", chart.Points[13].High, 5.030220, 1e-6)
	near(t, "2.5 m", chart.Points[6].High, 4.880822, 1e-6)
	near(t, "2.75 m", chart.Points[18].High, 4.752290, 1e-6)
}

// Montgomery's personal computers: 193 nonconformities, samples of 5.
func TestUChartLimits(t *testing.T) {
	l := must[Limits](t)(NewLimits(ChartU, 1.93, 5))
	near(t, "low", l.Low, 0.066133, 1e-6)
	near(t, "high", l.High, 3.793867, 1e-6)
}

// Laney 2002, p′: σz of published data sets recomputed with an independent program; values and outcomes as stated there.
func TestLaneyChart(t *testing.T) {
	cans := samplesOf(t, "p_chart_cans.csv", "D", "n")
	chart := must[Chart](t)(NewLaneyChart(ChartP, cans[:30]))
	near(t, "trial scatter", chart.Scatter, 1.660867, 1e-6)
	checkChart(t, "trial", chart, 0.2313333, 0, 0.528472)
	near(t, "adjusted scatter", must[Chart](t)(NewLaneyChart(ChartP, cans[30:])).Scatter, 1.007115, 1e-6)
	unequal := must[Chart](t)(NewLaneyChart(ChartP, samplesOf(t, "p_chart_variable_n.csv", "D", "n")))
	near(t, "unequal scatter", unequal.Scatter, 1.378137, 1e-6)
	if got := outside(unequal); len(got) != 0 || !math.IsNaN(unequal.RunLength) {
		t.Errorf("outside %v, run length %v", got, unequal.RunLength)
	}
}

// A count that lies on a limit is inside it (Nelson 1984: beyond): centre 16 has sigma 4 and limits 4 and 28.
func TestLimitIsInside(t *testing.T) {
	chart := must[Chart](t)(NewChartAt(ChartC, 16, []Sample{{3, 1}, {4, 1}, {28, 1}, {29, 1}}))
	checkChart(t, "centre 16", chart, 16, 4, 28, 1, 4)
	law := distuv.Poisson{Lambda: 16}
	near(t, "run length", chart.RunLength, 1/(law.CDF(3)+1-law.CDF(28)), 1e-6)
}

func TestChartWithoutEvents(t *testing.T) {
	chart := must[Chart](t)(NewChart(ChartP, []Sample{{0, 50}, {0, 80}}))
	if got := outside(chart); len(got) != 0 || !math.IsInf(chart.RunLength, 1) || !chart.Estimated {
		t.Errorf("got %+v", chart)
	}
	if z := must[Chart](t)(NewChartAt(ChartP, 0, []Sample{{0, 50}, {1, 50}})).Standardized(); z[0] != 0 || !math.IsInf(z[1], 1) {
		t.Errorf("standardized %v", z)
	}
}

func TestChartRefuses(t *testing.T) {
	for name, c := range map[string]struct {
		kind    ChartKind
		centre  float64
		samples []Sample
	}{
		"kind":            {"np", 0.1, []Sample{{1, 50}}},
		"no samples":      {ChartP, 0.1, nil},
		"negative count":  {ChartU, 0.1, []Sample{{-1, 50}}},
		"count over size": {ChartP, 0.1, []Sample{{51, 50}}},
		"size 0":          {ChartU, 0.1, []Sample{{0, 0}}},
		"broken units":    {ChartP, 0.1, []Sample{{1, 50.5}}},
		"c with size":     {ChartC, 0.1, []Sample{{1, 2}}},
		"share over 1":    {ChartP, 1.1, []Sample{{1, 50}}},
		"negative centre": {ChartU, -1, []Sample{{1, 50}}},
		"huge size":       {ChartU, 1, []Sample{{1, 1e300}}},
		"NaN centre":      {ChartU, math.NaN(), []Sample{{1, 50}}},
	} {
		_, err := NewChartAt(c.kind, c.centre, c.samples)
		wantError(t, name, err)
	}
	_, err := NewChart(ChartP, nil)
	wantError(t, "estimate from nothing", err)
	_, err = NewLaneyChart(ChartP, []Sample{{1, 50}})
	wantError(t, "scatter of one", err)
	_, err = NewLaneyChart(ChartC, []Sample{{1, 1}, {2, 1}})
	wantError(t, "c′", err)
}
