package lines

import "math"

// flankPx are how far beside a line its surroundings are summed, px of the plane: a line
// more than some 12 px wide does not stand out from them.
var flankPx = [...]float64{-11, -9, -7, -5, 5, 7, 9, 11}

// flankLoss is how many sigmas a line may lose at its flanks: their own noise takes some 6 %.
const flankLoss = 1.

// standsOut reports whether a line is still one above what lies on both sides of it. Where
// the level has a soft ridge, as haze has, all parallel lines nearby are as strong.
func (f *finder) standsOut(c course) bool {
	sum, weight := 0., 0.
	for _, p := range c.pieces {
		sum += float64(c.sign) * p.sum
		weight += p.weight
	}
	beside, square := 0., 0.
	for _, d := range flankPx {
		for _, p := range c.pieces {
			k := p.stretch
			k.ca, k.cb = k.ca+d/f.scale(), k.cb+d/f.scale()
			t := f.sum(k)
			beside += float64(c.sign) * t.sum
			square += t.weight
		}
	}
	if square < weight { // most of it is not there
		return true
	}
	share := weight / square
	net := (sum - beside*share) / math.Sqrt(rounding*weight*(1+share))
	return net >= c.white()-max(flankLoss, 0.3*c.white())
}
