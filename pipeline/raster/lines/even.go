package lines

import (
	"math"
	"slices"
)

// evenBlock is over how many positions the evidence of a line is taken together.
const evenBlock = 4

// trimmedShare is the share of the strongest blocks that a line must do without, and
// trimmedMean what their loss takes from the mean of a normal variable, φ(z)/(1 − share)
// with Q(z) = share: 0.3477/0.7.
const (
	trimmedShare = 0.3
	trimmedMean  = 0.4967
)

// leastEven is the share of a line's sigmas that must stay without its strongest blocks.
// An even line keeps √0.7 = 0.84; of a chain of spots hardly anything stays.
const leastEven = 0.5

// leastRest is how many sigmas must stay.
const leastRest = 3.5

// even reports whether the evidence is spread over the line.
func (f *finder) even(p piece) bool {
	v := f.profile(p.stretch)
	var z []float64
	for i := 0; i < len(v); i += evenBlock {
		var t total
		for _, one := range v[i:min(i+evenBlock, len(v))] {
			t = t.plus(one)
		}
		if t.weight > evenBlock/4. {
			z = append(z, t.sigmas(p.sign))
		}
	}
	if len(z) < 4 {
		return false
	}
	all := mean(z) * math.Sqrt(float64(len(z)))
	slices.Sort(z)
	rest := z[:len(z)-int(trimmedShare*float64(len(z)))]
	left := (mean(rest) + trimmedMean) * math.Sqrt(float64(len(rest)))
	return left >= leastEven*all && left >= leastRest*math.Sqrt(p.variance)
}

func mean(v []float64) float64 {
	sum := 0.
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}

// dim makes the brightest blocks of a line that was refused not count: they are spots,
// and lines through them in all directions would be looked at in vain.
func (f *finder) dim(p piece) {
	v := f.profile(p.stretch)
	for i := 0; i < len(v); i += evenBlock {
		var t total
		end := min(i+evenBlock, len(v))
		for _, one := range v[i:end] {
			t = t.plus(one)
		}
		if t.sigmas(p.sign) > 4 {
			f.erase(p.resized(p.a+i, p.a+end-1), 3)
		}
	}
}
