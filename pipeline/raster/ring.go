package raster

import (
	"math"
	"slices"
)

// RingProfile returns the mean over a ring's width, from radius r0 to r1 px about (x, y),
// in n evenly spaced directions from +x towards +y; false where the ring leaves the frame.
func RingProfile(src *Plane, x, y, r0, r1 float64, n int) ([]float64, bool) {
	steps := max(int(math.Ceil((r1-r0)/0.5)), 1)
	out := make([]float64, n)
	for k := range out {
		sin, cos := math.Sincos(2 * math.Pi * float64(k) / float64(n))
		for i := range steps {
			r := r0 + (float64(i)+0.5)*(r1-r0)/float64(steps)
			v, ok := bilinear(src, x+r*cos, y+r*sin)
			if !ok {
				return nil, false
			}
			out[k] += v / float64(steps)
		}
	}
	return out, true
}

// Mark is a mark found in a closed profile.
type Mark struct {
	At    float64 // its middle, in samples, 0 up to the profile's length
	Sigma float64 // its height in units of the rest's robust spread
	Lead  float64 // its height over that of the next best elsewhere; +Inf where there is none
}

// FindMark finds a raised piece of the width given, in samples, in a profile that closes
// on itself. It correlates with a box of this width less its two neighbours of half the
// width (a band-pass; the matched filter of a box on ground that wanders), and refines the
// highest place by a parabola. It returns false for a profile shorter than four widths
// or without any raised piece.
func FindMark(profile []float64, width int) (Mark, bool) {
	n := len(profile)
	if width < 2 || n < 4*width {
		return Mark{}, false
	}
	response := make([]float64, n)
	sum := make([]float64, 3*n+1)
	for i := range 3 * n {
		sum[i+1] = sum[i] + profile[i%n]
	}
	mean := func(from, length int) float64 { return (sum[from+length] - sum[from]) / float64(length) }
	side := max(width/2, 1)
	for i := range n {
		from := n + i - width/2
		response[i] = mean(from, width) - (mean(from-side, side)+mean(from+width, side))/2
	}
	best := 0
	for i, v := range response {
		if v > response[best] {
			best = i
		}
	}
	if !(response[best] > 0) {
		return Mark{}, false
	}
	m := Mark{At: float64(best), Sigma: response[best] / max(spreadOf(response), 1e-3*response[best]), Lead: math.Inf(1)}
	m.At += vertex(response[(best+n-1)%n], response[best], response[(best+1)%n])
	if width%2 == 0 {
		m.At -= 0.5 // the middle of an even box lies between two samples
	}
	second := 0.
	for i, v := range response {
		if d := (i - best + n + n/2) % n; math.Abs(float64(d-n/2)) > 1.5*float64(width) {
			second = max(second, v)
		}
	}
	if second > 0 {
		m.Lead = response[best] / second
	}
	m.At = math.Mod(m.At+float64(n), float64(n))
	return m, true
}

// vertex returns where, −1 to 1, the parabola through three values about the highest peaks.
func vertex(a, b, c float64) float64 {
	if bend := a - 2*b + c; bend < 0 {
		return min(max((a-c)/(2*bend), -1), 1)
	}
	return 0
}

func spreadOf(v []float64) float64 {
	off := make([]float64, len(v))
	for i, x := range v {
		off[i] = math.Abs(x)
	}
	slices.Sort(off)
	return 1.4826 * off[len(off)/2]
}
