package raster

import (
	"math"
	"slices"
)

// startSample is how many values the robust start of the clipping looks at.
const startSample = 512

// clipPasses is how often the clipping is repeated at most.
const clipPasses = 8

// clipper holds the buffer of the clipped moments.
type clipper struct{ sample []float32 }

// moments returns the clipped mean and standard deviation of values. It starts at the
// median and 1.4826 times the median absolute deviation (plus the floor, so that whole
// counts with little noise do not start at zero), then takes mean and deviation
// of the values within mean ± clip·sigma until nothing changes. The deviation is
// divided by truncation(clip) each time, so that it is unbiased for a normal
// distribution. values must not be empty.
func (c *clipper) moments(values []float32, clip, floor float64) (mean, sigma float64) {
	mean, sigma = c.start(values, floor)
	shrink := truncation(clip)
	last := -1
	for range clipPasses {
		low, high := float32(mean-clip*sigma), float32(mean+clip*sigma)
		centre := float32(mean)
		n, sum, sum2 := 0, 0., 0.
		for _, v := range values {
			if v >= low && v <= high {
				d := float64(v - centre)
				n++
				sum += d
				sum2 += d * d
			}
		}
		if n == 0 || n == last {
			break
		}
		last = n
		m := sum / float64(n)
		mean = float64(centre) + m
		sigma = math.Sqrt(max(sum2/float64(n)-m*m, 0)) / shrink
	}
	return mean, sigma
}

func (c *clipper) start(values []float32, floor float64) (median, sigma float64) {
	step := (len(values) + startSample - 1) / startSample
	c.sample = c.sample[:0]
	for i := 0; i < len(values); i += step {
		c.sample = append(c.sample, values[i])
	}
	slices.Sort(c.sample)
	m := c.sample[len(c.sample)/2]
	for i, v := range c.sample {
		c.sample[i] = max(v-m, m-v)
	}
	slices.Sort(c.sample)
	return float64(m), 1.4826 * (float64(c.sample[len(c.sample)/2]) + floor)
}

// truncation returns the standard deviation of a standard normal variable that is cut
// off at ±c: √(1 − 2c·φ(c)/(2Φ(c) − 1)) (Johnson, Kotz and Balakrishnan, Continuous
// Univariate Distributions, truncated normal).
func truncation(c float64) float64 {
	density := math.Exp(-c*c/2) / math.Sqrt(2*math.Pi)
	return math.Sqrt(1 - 2*c*density/math.Erf(c/math.Sqrt2))
}
