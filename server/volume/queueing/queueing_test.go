package queueing

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

// Source: textbook line balancing: 27 000 s for 900 units, 95 s of work.
func TestTakt(t *testing.T) {
	near(t, "takt", Takt(27000, 900), 30, 0)
	if got := StationsForTakt(95, 30); got != 4 {
		t.Errorf("stations: got %d, want 4", got)
	}
	if got := StationsForTakt(90, 30); got != 3 {
		t.Errorf("exact multiple: got %d, want 3", got)
	}
}

// Source: Erlang's formulas; table re-computed; C(10, 6) is published as "about 0.10".
func TestErlangTable(t *testing.T) {
	f, err := os.Open("testdata/erlang_table.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 43 {
		t.Fatalf("%d rows: %v", len(rows), err)
	}
	for _, row := range rows[1:] {
		v := make([]float64, len(row))
		for i, text := range row {
			v[i], _ = strconv.ParseFloat(text, 64)
		}
		c, a := int(v[0]), v[2]
		p, err := ErlangC(c, a)
		if err != nil {
			t.Fatal(err)
		}
		queue, _ := QueueMMc(c, a)
		wait, _ := WaitMMc(c, a)
		near(t, "B", ErlangB(c, a), v[3], 1e-8)
		near(t, "C", p, v[4], 1e-8)
		near(t, "Lq", queue, v[5], 1e-8)
		near(t, "Wq", wait, v[6], 1e-8)
	}
	p, _ := ErlangC(3, 2)
	wait, _ := WaitMMc(3, 2)
	near(t, "B(3, 2)", ErlangB(3, 2), .210526, 1e-6)
	near(t, "C(3, 2)", p, .444444, 1e-6)
	near(t, "Wq(3, 2)", wait, .444444, 1e-6)
}

// Source: embedded chain, re-computed (table of exact waits).
func TestWaitMDc(t *testing.T) {
	for _, r := range []struct {
		c       int
		a, want float64
	}{{1, .8, 2}, {2, 1, .176741}, {2, 1.6, .903284}, {3, 2, .234265}, {4, 3.2, .386095}, {5, 4, .289060}, {10, 8, .109828}} {
		got, err := WaitMDc(r.c, r.a)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "M/D/c", got, r.want, 1e-6)
	}
}

// Source: Pollaczek-Khinchine, M/D/1: Lq = rho^2/(2(1-rho)).
func TestWaitMD1(t *testing.T) {
	for _, rho := range []float64{.1, .5, .9, .99} {
		got, _ := WaitMDc(1, rho)
		near(t, "M/D/1", got*rho, rho*rho/(2*(1-rho)), 1e-12)
	}
}

// The roots against the plain chain N' = max(N-c,0)+Poisson(a), iterated.
func TestWaitMDcAgainstTheChain(t *testing.T) {
	for _, r := range []struct {
		c int
		a float64
	}{{2, 1.2}, {3, 2.4}, {7, 5.6}, {12, 9}, {20, 17}, {6, .5}, {16, 14}} {
		got, err := WaitMDc(r.c, r.a)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "chain", got, chainWait(r.c, r.a), 1e-7)
	}
}

func chainWait(c int, a float64) float64 {
	const states = 400
	arrivals := make([]float64, states)
	arrivals[0] = math.Exp(-a)
	for k := 1; k < states; k++ {
		arrivals[k] = arrivals[k-1] * a / float64(k)
	}
	p := make([]float64, states)
	p[0] = 1
	for range 3000 {
		next := make([]float64, states)
		for n, share := range p {
			if share < 1e-16 {
				continue
			}
			for k := 0; max(n-c, 0)+k < states && (arrivals[k] > 1e-17 || k < int(a)); k++ {
				next[max(n-c, 0)+k] += share * arrivals[k]
			}
		}
		p = next
	}
	queue := 0.0
	for n, share := range p {
		queue += share * float64(max(n-c, 0))
	}
	return queue / a
}

func TestOverloadIsRefused(t *testing.T) {
	if _, err := WaitMDc(2, 2); err == nil {
		t.Error("a full load was accepted")
	}
	if _, err := ErlangC(0, 0); err == nil {
		t.Error("no server was accepted")
	}
}

func TestStationsForWait(t *testing.T) {
	c, err := StationsForWait(1.6, .5)
	if err != nil {
		t.Fatal(err)
	}
	enough, _ := WaitMDc(c, 1.6)
	short, _ := WaitMDc(c-1, 1.6)
	if c != 3 || enough > .5 || short <= .5 {
		t.Errorf("got %d stations with wait %v, one fewer %v", c, enough, short)
	}
}

// Source: the usual shortcuts for M/D/2 at 1.6 erlangs: half of M/M/c gives
// .8889, Cosmetatos (1975) .9010; the exact wait lies within 2 % of both.
func TestWaitMDcAgainstApproximations(t *testing.T) {
	exact, _ := WaitMDc(2, 1.6)
	mmc, _ := WaitMMc(2, 1.6)
	near(t, "half of M/M/c", mmc/2, .8889, 5e-5)
	rho, c := .8, 2.0
	cosmetatos := mmc / 2 * (1 + (1-rho)*(c-1)*(math.Sqrt(4+5*c)-2)/(16*rho*c))
	near(t, "Cosmetatos", cosmetatos, .9010, 5e-5)
	near(t, "exact over half", mmc/2/exact, 1-.016, 5e-4)
	near(t, "exact over Cosmetatos", cosmetatos/exact, 1, .003)
}
