package yieldmodel

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

// Source: public course page (first four and negative binomial), re-computed.
func TestYieldModelTable(t *testing.T) {
	f, err := os.Open("testdata/yield_models.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 9 {
		t.Fatalf("%d rows: %v", len(rows), err)
	}
	for _, row := range rows[1:] {
		v := make([]float64, len(row))
		for i, text := range row {
			v[i], _ = strconv.ParseFloat(text, 64)
		}
		l := v[0]
		for i, got := range []float64{Poisson(l), MurphyTriangular(l), MurphyUniform(l), SeedsExponential(l), SeedsRoot(l),
			NegativeBinomial(l, .5), NegativeBinomial(l, 2), NegativeBinomial(l, 3), NegativeBinomial(l, 5)} {
			near(t, "lambda "+row[0]+" column "+strconv.Itoa(i), got, v[i+1], 6e-9)
		}
	}
	// Source: Bose-Einstein, value from memory, re-computed.
	near(t, "Bose-Einstein", BoseEinstein(.1, 5), .620921, 1e-6)
}

func TestModelsKeepTheirOrder(t *testing.T) {
	for l := 0.0; l < 20; l += .1 {
		if !(Poisson(l) <= MurphyTriangular(l) && MurphyTriangular(l) <= MurphyUniform(l) && MurphyUniform(l) <= SeedsExponential(l)) {
			t.Errorf("order broken at lambda %v", l)
		}
		near(t, "alpha 1 is Seeds", NegativeBinomial(l, 1), SeedsExponential(l), 1e-15)
		near(t, "alpha to infinity is Poisson", NegativeBinomial(l, 1e9), Poisson(l), 1e-7)
	}
}
