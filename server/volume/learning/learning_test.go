package learning

import (
	"math"
	"testing"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

func curve(t *testing.T, convention Convention, rate float64) *Curve {
	t.Helper()
	c, err := New(convention, rate)
	if err != nil {
		t.Fatal(err)
	}
	return &c
}

// Source: textbook 80 % and 85 % tables (values from memory, re-computed).
func TestEightyPercentTables(t *testing.T) {
	crawford, wright := curve(t, Crawford, .8), curve(t, Wright, .8)
	near(t, "b", crawford.Exponent(), -.3219281, 1e-7)
	for n, want := range map[float64]float64{2: 80, 4: 64, 8: 51.2, 10: 47.6510, 100: 22.7062} {
		near(t, "unit", 100*crawford.Unit(n), want, 1e-4)
	}
	near(t, "Crawford total of 10", 100*crawford.Total(10), 631.5373, 1e-4)
	near(t, "Wright total of 10", 100*wright.Total(10), 476.5099, 1e-4)
	near(t, "Wright 10th", 100*wright.Unit(10), 32.8552, 1e-4)
	near(t, "b 85", curve(t, Crawford, .85).Exponent(), -.2344653, 1e-7)
	near(t, "10th 85", 100*curve(t, Crawford, .85).Unit(10), 58.2820, 1e-4)
	near(t, "total 85", 100*curve(t, Crawford, .85).Total(10), 711.6063, 1e-4)
}

func TestTotalIsTheSumOfUnits(t *testing.T) {
	for _, c := range []*Curve{curve(t, Crawford, .8), curve(t, Wright, .8), curve(t, Crawford, .5), curve(t, Crawford, .3), curve(t, Crawford, 1), curve(t, Wright, .95)} {
		sum := 0.0
		for n := 1.0; n <= 20000; n++ {
			sum += c.Unit(n)
		}
		near(t, string(c.convention), c.Total(20000)/sum, 1, 1e-11)
	}
}

func TestTotalGrowsWithPartsOfUnits(t *testing.T) {
	for _, c := range []*Curve{curve(t, Crawford, .7), curve(t, Wright, .7)} {
		last := -1.0
		for n := 0.0; n < 40; n += .1 {
			if total := c.Total(n); total < last {
				t.Fatalf("%s: total falls at %v", c.convention, n)
			} else {
				last = total
			}
		}
	}
}

func TestNewRefuses(t *testing.T) {
	if _, err := New("log-linear", .8); err == nil {
		t.Error("an unnamed convention was accepted")
	}
	if _, err := New(Wright, 1.2); err == nil {
		t.Error("a rate above 1 was accepted")
	}
}
