package yield

import (
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

func repeat(value float64, times int) []float64 {
	values := make([]float64, times)
	for i := range values {
		values[i] = value
	}
	return values
}

// The rules' definitions in Western Electric, Statistical Quality Control Handbook 1956, and Nelson 1984,
// Journal of Quality Technology 16. want holds 1-based numbers of the point that completes the pattern.
func TestSignals(t *testing.T) {
	for _, c := range []struct {
		rule RunRule
		z    []float64
		want []int
	}{
		{OneBeyond3, []float64{0, 3.2, -3.5, 2.9}, []int{2, 3}},
		{OneBeyond3, []float64{0, 3.2, -3.4, 3}, []int{2, 3}}, // exactly 3 is inside
		{TwoOf3Beyond2, []float64{0, 2.5, 1.0, 2.6, 0}, []int{4}},
		{TwoOf3Beyond2, []float64{0, 2.3, 0.4, 2.2, -2.4, -0.2, -2.5}, []int{4, 7}},
		{FourOf5Beyond1, []float64{0, 1.2, 1.3, 0.2, 1.4, 1.5}, []int{6}},
		{FourOf5Beyond1, []float64{1.2, 1.3, 0.2, 1.4, 1.5, -1.2, -1.3, -0.1, -1.4, -1.5}, []int{5, 10}},
		{EightOneSide, append(repeat(-1, 8), 1), []int{8}},
		{NineOneSide, append(repeat(0.5, 10), repeat(-0.5, 10)...), []int{9, 10, 19, 20}},
		{EightOneSide, append(append(repeat(1, 7), 0), repeat(1, 7)...), nil}, // the centre ends a run
	} {
		var want []int
		for _, n := range c.want {
			want = append(want, n-1)
		}
		if got := must[[]int](t)(Signals(c.rule, c.z)); !reflect.DeepEqual(got, want) {
			t.Errorf("%s of %v: got %v, want %v", c.rule, c.z, got, want)
		}
	}
	_, err := Signals("seven", nil)
	wantError(t, "unknown rule", err)
}

// Champ & Woodall 1987, Technometrics 29: exact run lengths for normal data, rules 1 and 4 of Western Electric
// 152.73 in control and 14.58 at a shift of one sigma; rule 1 with nine in a row 216.70 recomputed by a Markov chain.
// A run of eight alone is 2^8 - 1 by the theory of runs of a fair coin.
func TestRunLengthWithRunsPublished(t *testing.T) {
	lengths := func(shift float64, length int) float64 {
		normal := distuv.Normal{Mu: shift, Sigma: 1}
		return runLengthWithRuns(normal.CDF(3)-normal.CDF(0), normal.CDF(0)-normal.CDF(-3), 0, length)
	}
	near(t, "in control", lengths(0, 8), 152.730, 5e-4)
	near(t, "shift", lengths(1, 8), 14.578, 5e-4)
	near(t, "nine", lengths(0, 9), 216.696, 5e-4)
	near(t, "coin", runLengthWithRuns(0.5, 0.5, 0, 8), 255, 1e-9)
}

// Counts drawn with a fixed seed are run through Signals and the limits until one of them speaks.
func TestRunLengthWithRunsDrawn(t *testing.T) {
	l := must[Limits](t)(NewLimits(ChartP, 0.04, 50)) // 2 of 50 lies on the centre
	want := must[float64](t)(l.RunLengthWithRuns(0.04, 8))
	law := distuv.Binomial{N: 50, P: 0.04, Src: rand.NewPCG(3, 4)}
	const runs = 4000
	sum, squares := 0.0, 0.0
	for range runs {
		length := float64(drawRun(t, l, law))
		sum += length
		squares += length * length
	}
	mean := sum / runs
	deviation := math.Sqrt((squares/runs - mean*mean) / runs)
	near(t, "run length", want, mean, 4*deviation)
	if alone := must[float64](t)(l.RunLength(0.04)); want >= alone {
		t.Errorf("%v with a second rule, %v without", want, alone)
	}
}

// drawRun draws one chart until it signals and gives its number of points.
func drawRun(t *testing.T, l Limits, law distuv.Binomial) int {
	var last []float64
	for n := 1; ; n++ {
		count := int(law.Rand())
		last = append(last, (float64(count)/l.Size-l.Centre)/l.Sigma)
		last = last[max(0, len(last)-8):]
		run := must[[]int](t)(Signals(EightOneSide, last))
		if l.beyond(count) || len(run) > 0 {
			return n
		}
	}
}
