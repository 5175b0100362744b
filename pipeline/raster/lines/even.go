package lines

import (
	"math"
	"slices"
)

// evenBlock is over how many positions the evidence of a line is taken together.
const evenBlock = 4

// A trim is the share of the strongest blocks that a line must do without, what their loss
// takes from the mean of a normal variable, φ(z)/(1 − share) with Q(z) = share, and the
// share of the line's sigmas that must stay. An even line keeps √(1 − share); of a chain of
// spots hardly anything stays.
type trim struct{ share, mean, least float64 }

var trims = [...]trim{{0.3, 0.4967, 0.5}, {0.5, 0.7979, 0.3}}

// leastRest is how many sigmas must stay, and enoughRest how many are a line whatever its
// strongest blocks are.
const leastRest, enoughRest = 3.5, 6

// blocks returns the evidence of a piece block by block, in sigmas of white noise.
func (f *finder) blocks(p piece) []float64 {
	v := f.profile(p.stretch)
	least := evenBlock * p.weight / float64(4*len(v)) // a quarter of the mean
	var z []float64
	for i := 0; i < len(v); i += evenBlock {
		var t total
		for _, one := range v[i:min(i+evenBlock, len(v))] {
			t = t.plus(one)
		}
		if t.weight > least {
			z = append(z, t.sigmas(p.sign))
		}
	}
	return z
}

// even reports whether evidence is spread over its blocks. variance is that of the line's
// sum over that of white noise.
func even(blocks []float64, variance float64) bool {
	if len(blocks) < 4 {
		return false
	}
	all := mean(blocks) * math.Sqrt(float64(len(blocks)))
	z := slices.Sorted(slices.Values(blocks))
	for _, cut := range trims {
		rest := z[:len(z)-int(cut.share*float64(len(z)))]
		left := (mean(rest) + cut.mean) * math.Sqrt(float64(len(rest)))
		left /= math.Sqrt(variance)
		if left < min(cut.least*all/math.Sqrt(variance), enoughRest) || cut == trims[0] && left < leastRest {
			return false
		}
	}
	return true
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
