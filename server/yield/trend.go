package yield

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Trend is the straight line of least squares through measurements over time.
// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 4.4.3.1 (formulas).
type Trend struct {
	N                          int
	Intercept, Slope           float64 // value at time 0, and per unit of time
	InterceptError, SlopeError float64 // standard errors
	Residual                   float64 // standard deviation about the line, N − 2 degrees of freedom
}

// NewTrend fits values over times, which must be finite, three at least, and not all at
// one time.
func NewTrend(times, values []float64) (Trend, error) {
	n := len(times)
	if n < 3 || len(values) != n {
		return Trend{}, fmt.Errorf("trend: got %d times and %d values, want three or more of each", n, len(values))
	}
	var meanT, meanV float64
	for i := range times {
		if math.IsNaN(times[i]+values[i]) || math.IsInf(times[i], 0) || math.IsInf(values[i], 0) {
			return Trend{}, fmt.Errorf("trend: point %d is (%v, %v), want finite numbers", i, times[i], values[i])
		}
		meanT += times[i] / float64(n)
		meanV += values[i] / float64(n)
	}
	var tt, tv float64
	for i := range times {
		dt := times[i] - meanT
		tt += dt * dt
		tv += dt * (values[i] - meanV)
	}
	if tt == 0 {
		return Trend{}, fmt.Errorf("trend: all %d values are of one time", n)
	}
	r := Trend{N: n, Slope: tv / tt}
	r.Intercept = meanV - r.Slope*meanT
	var squares float64
	for i := range times {
		d := values[i] - meanV - r.Slope*(times[i]-meanT)
		squares += d * d
	}
	r.Residual = math.Sqrt(squares / float64(n-2))
	r.SlopeError = r.Residual / math.Sqrt(tt)
	r.InterceptError = r.Residual * math.Sqrt(1/float64(n)+meanT*meanT/tt)
	return r, nil
}

// At returns the line's value at a time.
func (r Trend) At(t float64) float64 { return r.Intercept + r.Slope*t }

// Moves reports whether the slope differs from zero at a two-sided confidence, by
// Student's t with N − 2 degrees of freedom.
func (r Trend) Moves(confidence float64) bool {
	q := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(r.N - 2)}.Quantile(0.5 + confidence/2)
	return math.Abs(r.Slope) > q*r.SlopeError
}

// Crossing returns when the line, from a time on, meets a bound that it is on its way to;
// ok is false when it is past the bound, level or on its way away from it.
func (r Trend) Crossing(from, bound float64) (at float64, ok bool) {
	ahead := (bound - r.At(from)) / r.Slope
	if r.Slope == 0 || ahead < 0 {
		return 0, false
	}
	return from + ahead, true
}

// Approach is a bound that a measure is on its way to.
type Approach struct {
	Trend
	Bound float64
	At    float64 // when the line meets it
}

// FindApproach fits values over rising times and returns the bound that the line meets
// within ahead of the last time; low or high may be nil for no bound. ok is false where it
// meets none so soon, or where the slope may be chance at the two-sided confidence.
func FindApproach(times, values []float64, low, high *float64, ahead, confidence float64) (a Approach, ok bool, err error) {
	a.Trend, err = NewTrend(times, values)
	if err != nil || !a.Moves(confidence) {
		return a, false, err
	}
	last := times[len(times)-1]
	for _, bound := range []*float64{low, high} {
		if bound == nil {
			continue
		}
		if at, meets := a.Crossing(last, *bound); meets && at <= last+ahead {
			a.Bound, a.At = *bound, at
			return a, true, nil
		}
	}
	return a, false, nil
}
