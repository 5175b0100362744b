package render

import (
	"hash/fnv"
	"math"
	"math/rand/v2"
	"strconv"
)

// stream returns the random numbers of one thing. Streams of different names are
// independent, so a new feature does not move the numbers of another.
func stream(seed uint64, names ...string) *rand.Rand {
	h := fnv.New128a()
	h.Write(strconv.AppendUint(nil, seed, 10))
	for _, n := range names {
		h.Write([]byte{0})
		h.Write([]byte(n))
	}
	var a, b uint64
	for i, c := range h.Sum(nil) {
		if i < 8 {
			a = a<<8 | uint64(c)
		} else {
			b = b<<8 | uint64(c)
		}
	}
	return rand.New(rand.NewPCG(a, b))
}

// poisson returns a Poisson number by counting exponential gaps (Knuth, The Art of
// Computer Programming, vol. 2, 3.4.1); meant for means up to some hundreds.
func poisson(r *rand.Rand, mean float64) int {
	n := 0
	for sum := r.ExpFloat64(); sum < mean; sum += r.ExpFloat64() {
		n++
	}
	return n
}

// The shapes of a Distribution.
const (
	ShapeConstant   = "constant"
	ShapeUniform    = "uniform"
	ShapeLogUniform = "log_uniform"
	ShapeLogNormal  = "log_normal"
)

// Distribution is a distribution of one quantity, whose unit the key names. Values
// outside min … max never come: log_normal is cut there.
type Distribution struct {
	Shape  string  `yaml:"shape"`  // empty: constant
	Value  float64 `yaml:"value"`  // constant
	Min    float64 `yaml:"min"`    // the others
	Max    float64 `yaml:"max"`    // the others
	Median float64 `yaml:"median"` // log_normal, before cutting
	Spread float64 `yaml:"spread"` // log_normal: geometric standard deviation, > 1
}

// maxDraws bounds the draws until one lies inside; the check of a scene refuses
// distributions whose median lies outside, so that half of them do.
const maxDraws = 200

func (d Distribution) draw(r *rand.Rand) float64 {
	switch d.Shape {
	case ShapeUniform:
		return d.Min + (d.Max-d.Min)*r.Float64()
	case ShapeLogUniform:
		return d.Min * math.Pow(d.Max/d.Min, r.Float64())
	case ShapeLogNormal:
		for range maxDraws {
			if v := d.Median * math.Pow(d.Spread, r.NormFloat64()); v >= d.Min && v <= d.Max {
				return v
			}
		}
		return d.Median
	}
	return d.Value
}

// max returns the largest value that can come.
func (d Distribution) max() float64 {
	if d.Shape == ShapeConstant || d.Shape == "" {
		return d.Value
	}
	return d.Max
}
