package yield

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

func TestBinomialIntervalsPublished(t *testing.T) {
	for _, row := range table(t, "binomial_intervals_95.csv") {
		k, n := int(number(t, row["x"])), int(number(t, row["n"]))
		name := fmt.Sprintf("%d/%d", k, n)
		exact := must[Interval](t)(ClopperPearson(k, n, 0.95))
		nearInterval(t, name+" Clopper-Pearson", exact, number(t, row["cp_lo"]), number(t, row["cp_hi"]), 1e-6)
		score := must[Interval](t)(Wilson(k, n, 0.95))
		nearInterval(t, name+" Wilson", score, number(t, row["wilson_lo"]), number(t, row["wilson_hi"]), 1e-6)
	}
}

// Hanley & Lippman-Hand 1983, "If nothing goes wrong, is everything all right?": near 3/n.
func TestRuleOfThree(t *testing.T) {
	for n, want := range map[int]float64{300: 0.0099361, 100: 0.0295130, 30: 0.0950339} {
		upper := must[Interval](t)(ClopperPearsonUpper(0, n, 0.95))
		nearInterval(t, fmt.Sprint("0/", n), upper, 0, want, 1e-6)
		near(t, "closed form", upper.High, 1-math.Pow(0.05, 1/float64(n)), 1e-12)
	}
}

// Success-run sample sizes as printed in reliability handbooks (values from memory, recomputed); 598 is the
// least all-pass count that shows 99.5 % at 95 % confidence.
func TestTrialsWithoutFailure(t *testing.T) {
	for _, c := range []struct {
		reliability, confidence float64
		want                    int
	}{{.90, .95, 29}, {.90, .90, 22}, {.95, .95, 59}, {.99, .95, 299}, {.99, .90, 230}, {.999, .95, 2995}, {.995, .95, 598}, {.5, .75, 2}, {.9, .05, 1}} {
		n := must[int](t)(TrialsWithoutFailure(c.reliability, c.confidence))
		if n != c.want {
			t.Errorf("reliability %v confidence %v: got %d, want %d", c.reliability, c.confidence, n, c.want)
		}
		shown := must[Interval](t)(ClopperPearsonLower(n, n, c.confidence))
		if shown.Low < c.reliability-1e-12 {
			t.Errorf("%d of %d shows only %v", n, n, shown.Low)
		}
	}
}

// Garwood 1936, Biometrika 28; values as printed in tables of the Poisson mean (recomputed).
func TestPoissonPublished(t *testing.T) {
	for k, want := range map[int][2]float64{0: {0, 3.688879}, 1: {.025318, 5.571643}, 2: {.242209, 7.224688},
		3: {.618672, 8.767273}, 5: {1.623486, 11.668332}, 10: {4.795389, 18.390356}} {
		nearInterval(t, fmt.Sprint("count ", k), must[Interval](t)(Poisson(k, 0.95)), want[0], want[1], 1e-6)
	}
	for k, want := range []float64{2.995732, 4.743865, 6.295794, 7.753657} {
		upper := must[Interval](t)(PoissonUpper(k, 0.95))
		nearInterval(t, fmt.Sprint("upper ", k), upper, 0, want, 1e-6)
	}
}

// A one-sided bound is the end of the two-sided interval with twice the error.
func TestOneSidedBounds(t *testing.T) {
	for k := 0; k <= 12; k++ {
		both := must[Interval](t)(ClopperPearson(k, 12, 0.90))
		near(t, "exact lower", must[Interval](t)(ClopperPearsonLower(k, 12, 0.95)).Low, both.Low, 1e-9)
		near(t, "exact upper", must[Interval](t)(ClopperPearsonUpper(k, 12, 0.95)).High, both.High, 1e-9)
		score := must[Interval](t)(Wilson(k, 12, 0.90))
		near(t, "score lower", must[Interval](t)(WilsonLower(k, 12, 0.95)).Low, score.Low, 1e-9)
		near(t, "score upper", must[Interval](t)(WilsonUpper(k, 12, 0.95)).High, score.High, 1e-9)
		events := must[Interval](t)(Poisson(k, 0.90))
		near(t, "events lower", must[Interval](t)(PoissonLower(k, 0.95)).Low, events.Low, 1e-9)
		near(t, "events upper", must[Interval](t)(PoissonUpper(k, 0.95)).High, events.High, 1e-9)
	}
}

// coverage is the exact probability that the interval made from a binomial count holds the true rate.
func coverage(intervals []Interval, rate float64) float64 {
	law := distuv.Binomial{N: float64(len(intervals) - 1), P: rate}
	covered := 0.0
	for k, interval := range intervals {
		if interval.Contains(rate) {
			covered += law.Prob(float64(k))
		}
	}
	return covered
}

func allIntervals(t *testing.T, n int, confidence float64, of func(int, int, float64) (Interval, error)) []Interval {
	intervals := make([]Interval, n+1)
	for k := range intervals {
		intervals[k] = must[Interval](t)(of(k, n, confidence))
	}
	return intervals
}

func TestClopperPearsonCoverage(t *testing.T) {
	for _, n := range []int{1, 2, 5, 10, 29, 50, 200} {
		for _, confidence := range []float64{0.8, 0.95, 0.99} {
			intervals := allIntervals(t, n, confidence, ClopperPearson)
			for rate := 0.0005; rate < 1; rate += 0.0025 {
				if got := coverage(intervals, rate); got < confidence-1e-9 {
					t.Fatalf("n %d, rate %v, confidence %v: coverage %v", n, rate, confidence, got)
				}
			}
		}
	}
}

// The Wilson interval covers the nominal share on average over rates, though not at each: Agresti & Coull 1998.
func TestWilsonCoverage(t *testing.T) {
	for _, n := range []int{10, 29, 50, 200} {
		intervals := allIntervals(t, n, 0.95, Wilson)
		sum, lowest := 0.0, 1.0
		for i := range 400 {
			got := coverage(intervals, (float64(i)+0.5)/400)
			sum, lowest = sum+got/400, math.Min(lowest, got)
		}
		near(t, fmt.Sprintf("mean coverage, n %d", n), sum, 0.953, 0.005)
		if lowest >= 0.95 {
			t.Errorf("n %d: lowest coverage %v; the documentation says single rates fall below", n, lowest)
		}
	}
}

func TestBinomialIntervalProperties(t *testing.T) {
	for name, of := range map[string]func(int, int, float64) (Interval, error){"exact": ClopperPearson, "score": Wilson} {
		for _, n := range []int{1, 3, 20, 1000} {
			previous := Interval{Low: -1, High: -1}
			for k, interval := range allIntervals(t, n, 0.95, of) {
				if !interval.Contains(float64(k)/float64(n)) || interval.Low < 0 || interval.High > 1 {
					t.Fatalf("%s %d/%d: %v", name, k, n, interval)
				}
				if interval.Low <= previous.Low || interval.High <= previous.High {
					t.Fatalf("%s %d/%d: %v does not rise above %v", name, k, n, interval, previous)
				}
				mirror := must[Interval](t)(of(n-k, n, 0.95))
				nearInterval(t, "mirror", Interval{1 - mirror.High, 1 - mirror.Low}, interval.Low, interval.High, 1e-9)
				if wider := must[Interval](t)(of(k, n, 0.99)); wider.Width() <= interval.Width() {
					t.Fatalf("%s %d/%d: not wider at 0.99", name, k, n)
				}
				previous = interval
			}
		}
	}
}

func TestNoTrials(t *testing.T) {
	for _, of := range []func(int, int, float64) (Interval, error){ClopperPearson, ClopperPearsonLower, ClopperPearsonUpper, Wilson, WilsonLower, WilsonUpper} {
		if got := must[Interval](t)(of(0, 0, 0.95)); got != (Interval{0, 1}) {
			t.Errorf("no trials: %v", got)
		}
	}
	if rate := must[Rate](t)(NewRate(0, 0, 0.95)); !math.IsNaN(rate.Value) {
		t.Errorf("rate of nothing: %v", rate.Value)
	}
}

func TestBadArguments(t *testing.T) {
	for _, c := range []struct {
		count, trials int
		confidence    float64
	}{{-1, 5, .95}, {6, 5, .95}, {0, -1, .95}, {1, 5, 0}, {1, 5, 1}, {1, 5, 95}, {1, 5, math.NaN()}} {
		for _, of := range []func(int, int, float64) (Interval, error){ClopperPearson, ClopperPearsonLower, ClopperPearsonUpper, Wilson, WilsonLower, WilsonUpper} {
			_, err := of(c.count, c.trials, c.confidence)
			wantError(t, fmt.Sprint(c), err)
		}
	}
	for _, of := range []func(int, float64) (Interval, error){Poisson, PoissonLower, PoissonUpper} {
		_, err := of(-1, 0.95)
		wantError(t, "negative events", err)
		_, err = of(1, 1)
		wantError(t, "certainty", err)
	}
	for _, reliability := range []float64{0, 1, math.NaN(), 1 - 1e-12} {
		_, err := TrialsWithoutFailure(reliability, 0.95)
		wantError(t, fmt.Sprint("reliability ", reliability), err)
	}
}
