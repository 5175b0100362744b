// Package queueing has takt and waiting-line formulas for inspection stations.
// It knows no costs and simulates nothing.
package queueing

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"
)

// Takt is the time available per unit: working seconds over units wanted.
func Takt(working_s, units float64) float64 { return working_s / units }

// StationsForTakt is the smallest number of stations whose joint pace keeps
// the takt: ceil(cycle/takt). Textbook line balancing.
func StationsForTakt(cycle_s, takt_s float64) int {
	return int(math.Ceil(cycle_s/takt_s - 1e-9))
}

// ErlangB is the blocking probability of c servers at offered load a (in
// erlangs): B_k = a B/(k + a B), B_0 = 1. Source: Erlang 1917.
func ErlangB(c int, a float64) float64 {
	b := 1.0
	for k := 1; k <= c; k++ {
		b = a * b / (float64(k) + a*b)
	}
	return b
}

// ErlangC is the probability that an arrival waits in M/M/c at offered load
// a < c: C = B/(1 - rho (1-B)), rho = a/c. Source: Erlang 1917.
func ErlangC(c int, a float64) (float64, error) {
	if err := stable(c, a); err != nil {
		return 0, err
	}
	b := ErlangB(c, a)
	return b / (1 - a/float64(c)*(1-b)), nil
}

// WaitMMc is the mean wait in queue of M/M/c in service times: C/(c - a).
func WaitMMc(c int, a float64) (float64, error) {
	p, err := ErlangC(c, a)
	return p / (float64(c) - a), err
}

// QueueMMc is the mean number waiting in M/M/c: C rho/(1 - rho).
func QueueMMc(c int, a float64) (float64, error) {
	p, err := ErlangC(c, a)
	rho := a / float64(c)
	return p * rho / (1 - rho), err
}

// WaitMDc is the exact mean wait in queue of M/D/c (random arrivals, constant
// service time, c servers) in service times, at offered load a < c.
//
// Counted one service time apart, the number present obeys
// N' = max(N-c, 0) + Poisson(a) (Crommelin 1932), a bulk-service queue whose
// mean is a/(2(c-a)) + a/2 - (c-1)/2 + sum over k=1..c-1 of 1/(1-z_k), where
// z_k are the roots of z^c = exp(a(z-1)) inside the unit circle (Janssen and
// van Leeuwaarden 2005). The wait follows from Little's law: (E[N]-a)/a.
func WaitMDc(c int, a float64) (float64, error) {
	if err := stable(c, a); err != nil {
		return 0, err
	}
	if a == 0 {
		return 0, nil
	}
	n := float64(c)
	mean := a/(2*(n-a)) + a/2 - (n-1)/2
	for k := 1; 2*k <= c; k++ { // roots k and c-k are conjugate
		z, err := bulkRoot(c, k, a)
		if err != nil {
			return 0, err
		}
		if mean += real(1 / (1 - z)); 2*k < c {
			mean += real(1 / (1 - z))
		}
	}
	return math.Max(0, (mean-a)/a), nil
}

// bulkRoot solves z = w exp(a(z-1)/c) for the k-th c-th root of unity w, by
// the contraction itself and then Newton.
func bulkRoot(c, k int, a float64) (complex128, error) {
	w := cmplx.Exp(complex(0, 2*math.Pi*float64(k)/float64(c)))
	rho := complex(a/float64(c), 0)
	z := complex128(0)
	for range 6 {
		z = w * cmplx.Exp(rho*(z-1))
	}
	for range 60 {
		g := w * cmplx.Exp(rho*(z-1))
		step := (z - g) / (1 - rho*g)
		z -= step
		if cmplx.Abs(step) < 1e-15 {
			return z, nil
		}
	}
	return 0, fmt.Errorf("M/D/%d at load %v: root %d was not found", c, a, k)
}

// StationsForWait is the smallest number of servers whose exact M/D/c wait is
// not above limit (in service times) at offered load a.
func StationsForWait(a, limit float64) (int, error) {
	if !(limit > 0) || !(a >= 0) || math.IsInf(a, 0) {
		return 0, errors.New("want a wait above 0 and a finite offered load of at least 0")
	}
	for c := int(a) + 1; ; c++ {
		wait, err := WaitMDc(c, a)
		if err != nil || wait <= limit {
			return c, err
		}
	}
}

func stable(c int, a float64) error {
	if c < 1 || !(a >= 0) || a >= float64(c) {
		return fmt.Errorf("%d stations at an offered load of %v erlangs have no steady state; want load below stations", c, a)
	}
	return nil
}
