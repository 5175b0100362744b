package sampling

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

func readTable(t *testing.T, name string) [][]string {
	t.Helper()
	f, err := os.Open("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows[1:]
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

// Source: ISO 2859-1 table 1 as four agreeing public files give it.
func TestCodeLettersMatchTable1(t *testing.T) {
	for _, row := range readTable(t, "iso2859_1_table1_code_letters.csv") {
		for column, level := range Levels() {
			for _, end := range row[:2] {
				lot, err := strconv.Atoi(end)
				if err != nil {
					lot = 5_000_000 // the last row is open
				}
				got, err := CodeLetter(lot, level)
				if err != nil || got != row[2+column] {
					t.Errorf("lot %d level %s: got %s (%v), want %s", lot, level, got, err, row[2+column])
				}
			}
		}
	}
}

// Source: ISO 2859-1 table 2-A, arrows resolved (structure from a public file
// checked against the MIL-STD-105E scan).
func TestNormalPlansMatchTable2A(t *testing.T) {
	rows := readTable(t, "iso2859_1_table2A_normal_single.csv")
	if len(rows) < 16*11 {
		t.Fatalf("only %d rows in the table", len(rows))
	}
	for _, row := range rows {
		aql, _ := strconv.ParseFloat(row[1], 64)
		n, _ := strconv.Atoi(row[4])
		accept, _ := strconv.Atoi(row[5])
		got, err := PlanForLetter(row[0], aql)
		want := SinglePlan{row[3], n, accept}
		if err != nil || got != want {
			t.Errorf("%s at %v: got %+v (%v), want %+v", row[0], aql, got, err, want)
		}
	}
}

// Source: spot values of ISO 2859-1.
func TestNormalPlanSpotValues(t *testing.T) {
	for _, c := range []struct {
		lot  int
		aql  float64
		want SinglePlan
	}{
		{4000, 2.5, SinglePlan{"L", 200, 10}}, {1000, 1.0, SinglePlan{"J", 80, 2}},
		{500, 0.65, SinglePlan{"J", 80, 1}}, {100, 1.0, SinglePlan{"E", 13, 0}},
		{2000, 1.5, SinglePlan{"K", 125, 5}}, {30000, 0.65, SinglePlan{"M", 315, 5}},
	} {
		if got, err := NormalPlan(c.lot, "II", c.aql); err != nil || got != c.want {
			t.Errorf("lot %d AQL %v: got %+v (%v), want %+v", c.lot, c.aql, got, err, c.want)
		}
	}
}

func TestUnknownLevelAndAQLAreRefused(t *testing.T) {
	if _, err := NormalPlan(100, "IV", 1); err == nil {
		t.Error("level IV was accepted")
	}
	if _, err := NormalPlan(100, "II", 1.1); err == nil {
		t.Error("AQL 1.1 was accepted")
	}
	if _, err := NormalPlan(1, "II", 1); err == nil {
		t.Error("a lot of one was accepted")
	}
}

func TestOperatingCharacteristic(t *testing.T) {
	// Source: 7 CFR 42.140 and 42.141 (regulation: 26 %, about 99 %, 95 %).
	near(t, "500/3 at 1.0", SinglePlan{"", 500, 3}.AcceptProbabilityPoisson(0.010), 0.265026, 1e-6)
	near(t, "500/3 at 1.0, regulation", SinglePlan{"", 500, 3}.AcceptProbabilityPoisson(0.010), 0.26, 0.01)
	near(t, "500/3 at 0.10", SinglePlan{"", 500, 3}.AcceptProbabilityPoisson(0.001), 0.9982, 1e-4)
	near(t, "168/16 at 6.5", SinglePlan{"", 168, 16}.AcceptProbabilityPoisson(0.065), 0.946957, 1e-6)
	// Source: Montgomery, n 89 c 2.
	montgomery := SinglePlan{"", 89, 2}
	for p, want := range map[float64]float64{.005: .9897, .01: .9397, .02: .7366, .03: .4985, .04: .3042,
		.05: .1721, .06: .0919, .07: .0468, .08: .0230, .09: .0109} {
		near(t, "89/2", montgomery.AcceptProbability(p), want, 6e-5)
	}
	near(t, "AOQ", montgomery.AverageOutgoingQuality(.01, 10000), 0.0093133, 1e-7)
	near(t, "ATI", montgomery.AverageTotalInspection(.01, 10000), 686.73, 0.005)
	limit, at := montgomery.OutgoingLimit(10000)
	near(t, "AOQL", limit, 0.015246, 1e-6)
	near(t, "AOQL at", at, 0.02528, 1e-5)
	// Source: Kiermeier 2008, J. Stat. Software 26(6).
	near(t, "20/0", SinglePlan{"", 20, 0}.AcceptProbability(.05), .358486, 1e-6)
	near(t, "20/0", SinglePlan{"", 20, 0}.AcceptProbability(.15), .038760, 1e-6)
	near(t, "10/3", SinglePlan{"", 10, 3}.AcceptProbability(.10), .987205, 1e-6)
}

// Source: Kiermeier 2008, J. Stat. Software 26(6): PRP (.05, .95), CRP (.15, .075).
func TestFindSinglePlan(t *testing.T) {
	got, err := FindSinglePlan(.05, .95, .15, .075)
	if err != nil || got.N != 80 || got.Accept != 7 {
		t.Fatalf("got %+v (%v), want n 80 c 7", got, err)
	}
	near(t, "Pa(.05)", got.AcceptProbability(.05), .95341, 5e-6)
	near(t, "Pa(.15)", got.AcceptProbability(.15), .07272, 5e-6)
	if _, err := FindSinglePlan(.2, .95, .1, .1); err == nil {
		t.Error("good worse than poor was accepted")
	}
}

// Source: ISO 2859-1 operating characteristic tables, binomial, re-computed.
func TestQualityAtAcceptance(t *testing.T) {
	accepts := []float64{.99, .95, .90, .50, .10, .05}
	for plan, wants := range map[SinglePlan][]float64{
		{"J", 80, 2}:   {0.550, 1.030, 1.385, 3.329, 6.516, 7.661},
		{"K", 125, 3}:  {.664, 1.100, 1.403, 2.930, 5.266, 6.086},
		{"L", 200, 10}: {2.418, 3.115, 3.537, 5.325, 7.599, 8.334},
	} {
		for i, want := range wants {
			near(t, plan.Letter, 100*plan.QualityAt(accepts[i]), want, 6e-4)
		}
	}
}

// Source: 7 CFR 42.109 single plans. Common practice: lots at the AQL are
// accepted far more often than not (Poisson per 100 units).
func TestRegulationPlansAcceptAtTheAQL(t *testing.T) {
	sizes := []int{84, 168, 315, 500, 800}
	for aql, accepts := range map[float64][]int{0.25: {0, 1, 2, 3, 4}, 1.5: {3, 5, 8, 12, 18}, 6.5: {9, 16, 28, 42, 64}} {
		for i, accept := range accepts {
			got := SinglePlan{"", sizes[i], accept}.AcceptProbabilityPoisson(aql / 100)
			if got < 0.80 || got > 0.9995 {
				t.Errorf("n %d Ac %d at AQL %v: accepted with %.4f", sizes[i], accept, aql, got)
			}
		}
	}
}

// Reference: the incomplete beta of gonum, which the sum of terms replaces.
func TestBinomialSumAgreesWithIncompleteBeta(t *testing.T) {
	for _, c := range []struct {
		k, n int
		p    float64
	}{{0, 2, .5}, {1, 2, .5}, {3, 125, .03}, {21, 2000, .01}, {21, 2000, .25}, {21, 2000, .27}} {
		want := distuv.Binomial{N: float64(c.n), P: c.p}.CDF(float64(c.k))
		near(t, "binomial", BinomialAtMost(c.k, c.n, c.p), want, 1e-12)
	}
}

// Source: Dodge 1943; values re-computed from the published formulas.
func TestCSP1(t *testing.T) {
	for _, c := range []struct {
		plan                CSP1
		p, u, v, f, pa, aoq float64
	}{
		{CSP1{38, .1}, .01, 46.50843, 1000, 0.139997, 0.955558, 0.0086000},
		// The circulated F .155155 misses (u+fv)/(u+v) of its own row by 3e-6.
		{CSP1{50, .1}, .01, 65.28760, 1000, 0.155158, 0.938714, 0.0084484},
		{CSP1{100, .05}, .005, 130.15807, 4000, 0.079938, 0.968486, 0.0046003},
	} {
		near(t, "u", c.plan.ScreeningRun(c.p), c.u, 1e-5)
		near(t, "v", c.plan.SamplingRun(c.p), c.v, 1e-9)
		near(t, "F", c.plan.FractionInspected(c.p), c.f, 1e-6)
		near(t, "Pa", c.plan.AcceptProbability(c.p), c.pa, 1e-6)
		near(t, "AOQ", c.plan.AverageOutgoingQuality(c.p), c.aoq, 1e-7)
	}
	limit, at := CSP1{38, .1}.OutgoingLimit()
	near(t, "AOQL 38", limit, .028192, 5e-7)
	near(t, "AOQL 38 at", at, .0531, 5e-5)
	limit, _ = CSP1{50, .1}.OutgoingLimit()
	near(t, "AOQL 50", limit, .021566, 5e-7)
	limit, _ = CSP1{100, .05}.OutgoingLimit()
	near(t, "AOQL 100", limit, .015044, 5e-7)
}

// Source: a public answer for AOQL 5 %: 12, 14, 21; AOQLs re-computed.
func TestFindClearanceForFivePercent(t *testing.T) {
	for fraction, want := range map[float64]struct {
		i    int
		aoql float64
	}{1. / 4: {12, .04714}, 1. / 5: {14, .04830}, 1. / 10: {21, .04992}} {
		got, err := FindClearance(fraction, .05)
		if err != nil || got.Clearance != want.i {
			t.Errorf("f %v: got i %d (%v), want %d", fraction, got.Clearance, err, want.i)
		}
		aoql, _ := got.OutgoingLimit()
		near(t, "AOQL", aoql, want.aoql, 5e-6)
	}
}

// Source: standard table of i (value from memory); only the cells whose
// re-computed AOQL agrees within 3 % are held, the others are uncertain.
func TestCSP1Table(t *testing.T) {
	held := 0
	for _, row := range readTable(t, "csp1_i_f_aoql.csv") {
		if row[5] != "yes" {
			continue
		}
		denominator, _ := strconv.ParseFloat(row[0][2:], 64)
		i, _ := strconv.Atoi(row[1])
		nominal, _ := strconv.ParseFloat(row[2], 64)
		limit, at := CSP1{i, 1 / denominator}.OutgoingLimit()
		near(t, row[0]+" i "+row[1], 100*limit, nominal, 0.03*nominal)
		computed, _ := strconv.ParseFloat(row[3], 64)
		near(t, "re-computed "+row[0], 100*limit, computed, 6e-5)
		where, _ := strconv.ParseFloat(row[4], 64)
		near(t, "at "+row[0], 100*at, where, 2e-4)
		held++
	}
	if held != 141 {
		t.Errorf("held %d cells, want the 141 certain ones", held)
	}
}
