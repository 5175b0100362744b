// Package yieldmodel predicts yield from area and defect density, one function
// per published model. It fits nothing and knows no ledger.
//
// In every function lambda = area times mean defect density: the mean number
// of killing defects per unit.
package yieldmodel

import "math"

// Poisson is exp(-lambda): defects scattered evenly.
func Poisson(lambda float64) float64 { return math.Exp(-lambda) }

// MurphyTriangular is ((1-exp(-lambda))/lambda)^2: density spread as a
// triangle. Source: Murphy 1964.
func MurphyTriangular(lambda float64) float64 {
	if lambda == 0 {
		return 1
	}
	r := -math.Expm1(-lambda) / lambda
	return r * r
}

// MurphyUniform is (1-exp(-2 lambda))/(2 lambda): density spread evenly from 0
// to twice its mean. Source: Murphy 1964.
func MurphyUniform(lambda float64) float64 {
	if lambda == 0 {
		return 1
	}
	return -math.Expm1(-2*lambda) / (2 * lambda)
}

// SeedsExponential is 1/(1+lambda): density spread exponentially. Source:
// Seeds 1967. SeedsRoot also goes by his name.
func SeedsExponential(lambda float64) float64 { return 1 / (1 + lambda) }

// SeedsRoot is exp(-sqrt(lambda)), the other form that circulates as Seeds'.
func SeedsRoot(lambda float64) float64 { return math.Exp(-math.Sqrt(lambda)) }

// NegativeBinomial is (1+lambda/alpha)^-alpha; small alpha means clustered
// defects. Source: Stapper 1973.
func NegativeBinomial(lambda, alpha float64) float64 {
	return math.Exp(-alpha * math.Log1p(lambda/alpha))
}

// BoseEinstein is (1+lambda)^-n for n critical layers of lambda each. Source:
// Price 1970 (value from memory).
func BoseEinstein(lambda float64, n int) float64 { return math.Pow(1+lambda, -float64(n)) }
