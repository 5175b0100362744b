package lines

import (
	"math"
	"slices"
)

// A spot is something compact that lies on a line: a run of positions that stand out above
// the line's own level, not spotRatio times as long as it is wide. It says nothing of a
// line, and a chain of them must not pass for one.
const (
	spotCore  = 3. // sigmas that the mean of 3 positions stands out by, at least once in a run
	spotFoot  = 1. // and at all places of it
	spotRatio = 3.
	spotEdge  = 2 // px beyond a run that are taken out with it
)

// mostSpots is how often a line is looked at again after spots on it were taken out.
const mostSpots = 6

// lowShare is the share of positions below which a line's level is read, and lowShift how
// many sigmas below the mean of a normal variable that is: spots may then cover most of it.
const lowShare, lowShift = 0.3, 0.5244

// level is that of a line, sigmas of one position, whatever spots lie on it.
func level(z []float64) float64 {
	s := slices.DeleteFunc(slices.Clone(z), math.IsNaN)
	if len(s) == 0 {
		return 0
	}
	slices.Sort(s)
	return max(s[int(lowShare*float64(len(s)))]+lowShift, 0)
}

// heights returns what each position of a stretch adds, in its own sigmas; NaN where it has
// too few pixels that count.
func (f *finder) heights(k stretch, sign int) []float64 {
	v, least := f.profile(k), 0.25*f.weights.square(k.slope())
	out := make([]float64, len(v))
	for i, t := range v {
		out[i] = math.NaN()
		if t.weight > least {
			out[i] = t.sigmas(sign)
		}
	}
	return out
}

// takeOut makes the spots on a stretch of a line not count, and reports whether there are any.
func (f *finder) takeOut(k stretch, sign int, base float64) bool {
	z := smoothed(f.heights(k, sign))
	any := false
	for _, r := range runs(z, base) {
		any = f.takeOutRun(k, k.a+r[0], k.a+r[1], sign, base) || any
	}
	return any
}

// runs returns the first and last positions of what stands out above a level.
func runs(z []float64, base float64) [][2]int {
	var out [][2]int
	for i := 0; i < len(z); i++ {
		if !(z[i] > base+spotCore) {
			continue
		}
		first, last := i, i
		for first > 0 && z[first-1] > base+spotFoot {
			first--
		}
		for last+1 < len(z) && z[last+1] > base+spotFoot {
			last++
		}
		out = append(out, [2]int{first, last})
		i = last
	}
	return out
}

// takeOutRun makes positions a to b not count, as far across as they stand out, should they
// be a spot. What goes on across is another line, of which only the crossing is taken out.
func (f *finder) takeOutRun(k stretch, a, b, sign int, base float64) bool {
	run, wide := k.resized(a, b), 1
	reach := 0
	for _, side := range []float64{-1, 1} {
		for d := 1; d <= mostReach; d++ {
			beside := run
			beside.ca, beside.cb = run.ca+side*float64(d), run.cb+side*float64(d)
			if t := f.sum(beside); t.sigmas(sign)/math.Sqrt(float64(b-a+1)) < (base+spotFoot)/2 {
				break
			}
			wide++
			reach = max(reach, d)
		}
	}
	long, across := run.length(), float64(wide)/math.Hypot(1, k.slope())
	if long >= spotRatio*across {
		return false
	}
	if across > spotRatio*long {
		reach = 0
	}
	f.erase(k.resized(a-spotEdge, b+spotEdge), min(reach+spotEdge, mostReach))
	return true
}

// smoothed returns means of three in a row, NaN where the middle one is.
func smoothed(z []float64) []float64 {
	out := make([]float64, len(z))
	for i := range z {
		sum, n := 0., 0.
		for _, v := range z[max(i-1, 0):min(i+2, len(z))] {
			if !math.IsNaN(v) {
				sum, n = sum+v, n+1
			}
		}
		out[i] = sum / n
		if math.IsNaN(z[i]) {
			out[i] = math.NaN()
		}
	}
	return out
}

// restShare is the share of the threshold that a line must reach on the plane itself
// without the spots on it.
const restShare = 0.75

// stays reports whether enough of a line is left on the plane itself without the spots on
// it: in half resolution, and where values are cut off, digs near each other run together.
// middle is the plane along the line, width that of the line, px.
func (f *finder) stays(middle []float64, width float64) bool {
	rest, base := slices.Clone(middle), level(middle)
	for _, r := range runs(smoothed(middle), base) {
		if float64(r[1]-r[0]+1) < spotRatio*max(width, 2) {
			for k := max(r[0]-spotEdge, 0); k <= min(r[1]+spotEdge, len(rest)-1); k++ {
				rest[k] = math.NaN()
			}
		}
	}
	rest = slices.DeleteFunc(rest, math.IsNaN)
	if len(rest) == len(middle) {
		return true
	}
	n := float64(len(rest))
	return n > 0 && mean(rest)*math.Sqrt(n/alongVariance) >= restShare*f.s.Threshold
}
