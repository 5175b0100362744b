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
	convention Convention
	exponent   float64         // b = ln(rate)/ln 2
	head       [direct]float64 // Crawford totals of 1, 2 ... direct units
	rest       float64         // what tail leaves out
}

// direct is how many units are summed one by one before Euler-Maclaurin.
const direct = 16

// New makes the curve that leaves rate of the cost after each doubling: 0.8
// for an 80 % curve. It refuses an unknown convention and a rate outside (0, 1].
func New(convention Convention, rate float64) (Curve, error) {
	if convention != Crawford && convention != Wright {
		return Curve{}, fmt.Errorf("learning convention %q is unknown; allowed: %s, %s", convention, Crawford, Wright)
	}
	if !(rate > 0 && rate <= 1) {
		return Curve{}, fmt.Errorf("learning rate %v; allowed: above 0, at most 1", rate)
	}
	c := Curve{convention: convention, exponent: math.Log(rate) / math.Ln2}
	sum := 0.0
	for k := range c.head {
		sum += math.Pow(float64(k+1), c.exponent)
		c.head[k] = sum
	}
	c.rest = sum - tail(direct, c.exponent)
	return c, nil
}

// Exponent is b = ln(rate)/ln 2, at most 0.
func (c *Curve) Exponent() float64 { return c.exponent }

// Unit is the relative cost of the n-th unit. Crawford 1944: n^b.
// Wright 1936: n^(1+b) - (n-1)^(1+b).
func (c *Curve) Unit(n float64) float64 {
	b := c.Exponent()
	if c.convention == Wright {
		return math.Pow(n, 1+b) - math.Pow(n-1, 1+b)
	}
	return math.Pow(n, b)
}

// Total is the relative cost of the first n units. Crawford: sum of k^b, a
// part of a unit counted by its share. Wright: n^(1+b).
func (c *Curve) Total(n float64) float64 {
	if n <= 0 {
		return 0
	}
	if c.convention == Wright {
		return c.wrightTotal(n)
	}
	whole := math.Floor(n)
	return c.sum(whole) + (n-whole)*power(whole+1, c.exponent)
}

// wrightTotal keeps part of the first unit in proportion: an average below one
// unit has no meaning.
func (c *Curve) wrightTotal(n float64) float64 {
	if n < 1 {
		return n
	}
	return power(n, 1+c.exponent)
}

// sum is the sum of k^b for k = 1..n: one by one for the first units, then
// Euler-Maclaurin, whose error here is below 1e-12 of the sum.
func (c *Curve) sum(n float64) float64 {
	switch {
	case n < 1:
		return 0
	case n <= direct:
		return c.head[int(n)-1]
	}
	return c.rest + tail(n, c.exponent)
}

// tail is the Euler-Maclaurin form of the sum up to m, less a constant.
func tail(m, b float64) float64 {
	p := power(m, b)
	integral := p * m / (1 + b)
	if math.Abs(1+b) < 1e-12 {
		integral = math.Log(m)
	}
	return integral + p/2 + b*p/m/12 - b*(b-1)*(b-2)*p/(m*m*m)/720 +
		b*(b-1)*(b-2)*(b-3)*(b-4)*p/(m*m*m*m*m)/30240
}

// power is x^b for x of 1 and more; it costs half of math.Pow, and Total runs
// once for every quantity, combination and draw.
func power(x, b float64) float64 { return math.Exp(b * math.Log(x)) }
