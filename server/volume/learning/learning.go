// Package learning has the learning curves of manufacturing, each by the name
// of its convention. It fits nothing.
package learning

import (
	"fmt"
	"math"
)

// Convention says what falls by the rate with every doubling.
type Convention string

// The conventions. They differ by up to a third in the total of ten units.
const (
	Crawford Convention = "crawford" // the cost of the n-th unit
	Wright   Convention = "wright"   // the average cost of the first n units
)

// Curve gives costs relative to that of the first unit.
type Curve struct {
	Convention Convention
	Rate       float64 // share left after each doubling: 0.8 for an 80 % curve
}

// New refuses an unknown convention and a rate outside (0, 1].
func New(convention Convention, rate float64) (Curve, error) {
	if convention != Crawford && convention != Wright {
		return Curve{}, fmt.Errorf("learning convention %q is unknown; allowed: %s, %s", convention, Crawford, Wright)
	}
	if !(rate > 0 && rate <= 1) {
		return Curve{}, fmt.Errorf("learning rate %v; allowed: above 0, at most 1", rate)
	}
	return Curve{convention, rate}, nil
}

// Exponent is b = ln(rate)/ln 2, at most 0.
func (c Curve) Exponent() float64 { return math.Log(c.Rate) / math.Ln2 }

// Unit is the relative cost of the n-th unit. Crawford 1944: n^b.
// Wright 1936: n^(1+b) - (n-1)^(1+b).
func (c Curve) Unit(n float64) float64 {
	b := c.Exponent()
	if c.Convention == Wright {
		return math.Pow(n, 1+b) - math.Pow(n-1, 1+b)
	}
	return math.Pow(n, b)
}

// Total is the relative cost of the first n units. Crawford: sum of k^b, a
// part of a unit counted by its share. Wright: n^(1+b).
func (c Curve) Total(n float64) float64 {
	if n <= 0 {
		return 0
	}
	if c.Convention == Wright {
		return c.wrightTotal(n)
	}
	whole := math.Floor(n)
	return sumPowers(whole, c.Exponent()) + (n-whole)*math.Pow(whole+1, c.Exponent())
}

// wrightTotal keeps part of the first unit in proportion: an average below one
// unit has no meaning.
func (c Curve) wrightTotal(n float64) float64 {
	if n < 1 {
		return n
	}
	return math.Pow(n, 1+c.Exponent())
}

// sumPowers is the sum of k^b for k = 1..n: term by term for the first ones,
// then Euler-Maclaurin, whose error here is below 1e-12 of the sum.
func sumPowers(n, b float64) float64 {
	const direct = 16
	sum := 0.0
	for k := 1.0; k <= math.Min(n, direct); k++ {
		sum += math.Pow(k, b)
	}
	if n <= direct {
		return sum
	}
	return sum + tail(n, b) - tail(direct, b)
}

// tail is the Euler-Maclaurin form of the sum up to m, less a constant.
func tail(m, b float64) float64 {
	p := math.Pow(m, b)
	integral := p * m / (1 + b)
	if math.Abs(1+b) < 1e-12 {
		integral = math.Log(m)
	}
	return integral + p/2 + b*p/m/12 - b*(b-1)*(b-2)*p/(m*m*m)/720 +
		b*(b-1)*(b-2)*(b-3)*(b-4)*p/(m*m*m*m*m)/30240
}
