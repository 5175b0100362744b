package yield

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// slowSignal sums single probabilities of all counts that the chart's own comparison calls outside.
func slowSignal(l Limits, rate float64) float64 {
	sum := 0.0
	for k := 0; k <= 400; k++ {
		var p float64
		if l.Kind == ChartP {
			p = distuv.Binomial{N: l.Size, P: rate}.Prob(float64(k))
		} else {
			p = distuv.Poisson{Lambda: rate * l.Size}.Prob(float64(k))
		}
		if l.beyond(k) && !(l.Kind == ChartP && float64(k) > l.Size) {
			sum += p
		}
	}
	return sum
}

func TestRunLengthAgainstSums(t *testing.T) {
	for _, c := range []struct {
		kind         ChartKind
		centre, size float64
		rates        []float64
	}{
		{ChartP, 0.02, 50, []float64{0.005, 0.02, 0.1}}, {ChartP, 0.1, 100, []float64{0.1, 0.05}}, {ChartP, 0.5, 60, []float64{0.5, 0.3}},
		{ChartP, 0.97, 200, []float64{0.97, 0.99}}, {ChartU, 1.423256, 12.5, []float64{1.423256, 3}}, {ChartC, 5.65, 1, []float64{5.65, 9}}, {ChartC, 19.67, 1, []float64{19.67, 10}},
	} {
		l := must[Limits](t)(NewLimits(c.kind, c.centre, c.size))
		for _, rate := range c.rates {
			got := must[float64](t)(l.RunLength(rate))
			want := 1 / slowSignal(l, rate)
			near(t, fmt.Sprintf("%s %v/%v at %v", c.kind, c.centre, c.size, rate), got, want, 1e-8*want)
		}
	}
}

// The 370 points of normal data do not hold for counts: n 50, rate 0.02 signals at 4 or more, which is once in 56.
func TestRunLengthOfSmallCounts(t *testing.T) {
	small := must[Limits](t)(NewLimits(ChartP, 0.02, 50))
	below := 0.0 // binomial by hand
	for k, choose := range []float64{1, 50, 1225, 19600} {
		below += choose * math.Pow(0.02, float64(k)) * math.Pow(0.98, float64(50-k))
	}
	got := must[float64](t)(small.RunLength(0.02))
	near(t, "by hand", got, 1/(1-below), 1e-8)
	near(t, "rounded", math.Round(got), 56, 0)
	large := must[Limits](t)(NewLimits(ChartP, 0.5, 1_000_000))
	near(t, "normal limit", must[float64](t)(large.RunLength(0.5)), 370.398, 3)
}

func TestChartRunLength(t *testing.T) {
	equal := must[Chart](t)(NewChartAt(ChartP, 0.02, []Sample{{1, 50}, {2, 50}}))
	l := must[Limits](t)(NewLimits(ChartP, 0.02, 50))
	near(t, "equal sizes", equal.RunLength, must[float64](t)(l.RunLength(0.02)), 1e-9)
	unequal := must[Chart](t)(NewChartAt(ChartP, 0.02, []Sample{{1, 50}, {2, 200}}))
	other := must[Limits](t)(NewLimits(ChartP, 0.02, 200))
	near(t, "two sizes", unequal.RunLength, 2/(slowSignal(l, 0.02)+slowSignal(other, 0.02)), 1e-6)
}

// A rate that moves by half a point around 3 % makes a chart of 2000 units signal every dozen points or so:
// checked against drawn samples with a fixed seed.
func TestRunLengthScattered(t *testing.T) {
	l := must[Limits](t)(NewLimits(ChartP, 0.03, 2000))
	got := must[float64](t)(l.RunLengthScattered(0.03, 0.005))
	source := rand.NewPCG(1, 2)
	strength := 0.03*0.97/(0.005*0.005) - 1
	rates := distuv.Beta{Alpha: 0.03 * strength, Beta: 0.97 * strength, Src: source}
	const points = 20000
	signals := 0
	for range points {
		if l.beyond(int(distuv.Binomial{N: 2000, P: rates.Rand(), Src: source}.Rand())) {
			signals++
		}
	}
	share := must[Interval](t)(ClopperPearson(signals, points, 0.999))
	if !share.Contains(1 / got) {
		t.Errorf("computed %v, drawn between %v and %v", got, 1/share.High, 1/share.Low)
	}
	plain := must[float64](t)(l.RunLength(0.03))
	still := must[float64](t)(l.RunLengthScattered(0.03, 1e-6))
	near(t, "no scatter", still, plain, 1e-3*plain)
	t.Logf("run length %.1f with scatter, %.1f without", got, plain)
}

func TestRunLengthNeverSignals(t *testing.T) {
	l := must[Limits](t)(NewLimits(ChartP, 0.5, 2)) // limits 0 and 1 hold every count
	if got := must[float64](t)(l.RunLength(0.9)); !math.IsInf(got, 1) {
		t.Errorf("got %v", got)
	}
	none := must[Limits](t)(NewLimits(ChartC, 0, 1))
	near(t, "any event signals", must[float64](t)(none.RunLength(0.1)), 1/(1-math.Exp(-0.1)), 1e-9)
}

func TestRunLengthRefuses(t *testing.T) {
	l := must[Limits](t)(NewLimits(ChartP, 0.1, 50))
	_, err := l.RunLength(1.2)
	wantError(t, "rate", err)
	_, err = l.RunLengthScattered(0.1, 0.5)
	wantError(t, "more scatter than a share can have", err)
	_, err = l.RunLengthWithRuns(0.1, 1)
	wantError(t, "run of one", err)
	c := must[Limits](t)(NewLimits(ChartC, 5, 1))
	_, err = c.RunLengthScattered(5, 1)
	wantError(t, "scattered c", err)
}
