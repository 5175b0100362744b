package lines

import (
	"math"
	"math/rand/v2"
	"slices"

	"lapgate/pipeline/raster"
)

// rings is how line sums scatter about a centre, by distance and by the angle between line
// and ring: concentric lay makes those along the rings scatter wherever they lie.
type rings struct {
	centre raster.Point
	most   float64   // distance of the farthest corner
	values []scatter // [ring][angle]
}

// ringAngles are the angles between line and ring, degrees, of either sign: a line of 128
// px falls out of step with lay of some px period within a few degrees.
var ringAngles = [...]float64{0, 1, 2, 3, 4.5, 6, 8, 11, 15, 20}

const (
	ringBins    = 8   // of distance, evenly spaced
	ringSamples = 240 // lines looked at for one value
	ringLook    = 400 // lines looked at to tell whether there is lay at all
	ringLeast   = 1.5 // variance along the rings over that across them that means lay
)

// findRings measures the scatter about the centre of the settings; nil where there is no
// centre, or lines along the rings scatter as others do.
func (f *finder) findRings() *rings {
	if f.s.Centre == nil {
		return nil
	}
	w, h := float64(f.work.width), float64(f.work.height)
	r := &rings{centre: *f.s.Centre}
	for _, x := range []float64{0, w} {
		for _, y := range []float64{0, h} {
			r.most = max(r.most, distance(r.centre, raster.Point{X: x, Y: y}))
		}
	}
	random := rand.New(rand.NewPCG(1, 1)) // of the places looked at: the same each time
	along, across := f.sampleRings(r, random, 0, r.most, 0, ringLook).orWhite(), f.sampleRings(r, random, 0, r.most, 50, ringLook).orWhite()
	if along[0] < ringLeast*max(across[0], 0.05) && along[1] < ringLeast*max(across[1], 0.05) && along[2] < ringLeast*max(across[2], 0.05) {
		return nil
	}
	for i := range ringBins {
		low, high := r.most*float64(i)/ringBins, r.most*float64(i+1)/ringBins
		for _, angle := range ringAngles {
			r.values = append(r.values, f.sampleRings(r, random, low, high, angle, ringSamples))
		}
	}
	r.fill()
	return r
}

// fill gives rings of which too little is seen, as in the corners of a frame, what the next
// one inwards has, or else outwards.
func (r *rings) fill() {
	n := len(ringAngles)
	for i := n; i < len(r.values); i++ {
		r.values[i] = r.values[i].orThose(r.values[i-n])
	}
	for i := len(r.values) - 1 - n; i >= 0; i-- {
		r.values[i] = r.values[i].orThose(r.values[i+n])
	}
	for i := range r.values {
		r.values[i] = r.values[i].orWhite()
	}
}

// orThose returns the scatter with those of o where nothing is known.
func (s scatter) orThose(o scatter) scatter {
	for level, v := range s {
		if v == 0 {
			s[level] = o[level]
		}
	}
	return s
}

func (s scatter) orWhite() scatter { return s.orThose(scatter{1, 1, 1}) }

// ringTries is how many places are drawn for each line looked at.
const ringTries = 60

// sampleRings looks at lines through random places of the picture between two distances from
// the centre, at an angle to the rings, and returns how their sums scatter; 0 where too few
// of the length count.
func (f *finder) sampleRings(r *rings, random *rand.Rand, low, high, angle float64, n int) scatter {
	var values [levels][]float64
	width, height := float64(f.work.width), float64(f.work.height)
	for range ringTries * n {
		if len(values[0]) == n {
			break
		}
		p := raster.Point{X: width * random.Float64(), Y: height * random.Float64()}
		if d := distance(p, r.centre); d < low || d >= high {
			continue
		}
		at, turn := math.Atan2(p.Y-r.centre.Y, p.X-r.centre.X), angle*math.Pi/180
		if random.IntN(2) == 0 {
			turn = -turn
		}
		for level := range values {
			if z, ok := f.through(p, at+math.Pi/2+turn, levelRows[level]); ok {
				values[level] = append(values[level], z*z)
			}
		}
	}
	var out scatter
	for level, v := range values {
		if len(v) >= n/8 {
			out[level] = middle(v) / chiMedian
		}
	}
	return out
}

// chiMedian is the median of the square of a standard normal variable.
const chiMedian = 0.4549

// through is the sum along the line of some positions through p, in sigmas of white noise;
// ok is false where half of it does not count.
func (f *finder) through(p raster.Point, angle float64, positions int) (float64, bool) {
	sin, cos := math.Sincos(angle)
	half := float64(positions) / 2 / max(math.Abs(sin), math.Abs(cos))
	k, ok := between(raster.Point{X: p.X - half*cos, Y: p.Y - half*sin}, raster.Point{X: p.X + half*cos, Y: p.Y + half*sin})
	if !ok {
		return 0, false
	}
	t := f.sum(k)
	return t.sigmas(1), t.weight > 0.5*f.weights.square(k.slope())*float64(positions)
}

// along is the mean scatter along a stretch.
func (r *rings) along(k stretch) scatter {
	p, q := k.ends()
	n := int(distance(p, q)/64) + 1
	direction := math.Atan2(q.Y-p.Y, q.X-p.X)
	var out scatter
	for i := range n {
		t := (float64(i) + 0.5) / float64(n)
		one := r.at(raster.Point{X: p.X + t*(q.X-p.X), Y: p.Y + t*(q.Y-p.Y)}, direction)
		for level, v := range one {
			out[level] += v / float64(n)
		}
	}
	return out
}

// at is the scatter of lines through p in a direction (rad): the largest of the
// neighbouring angles and rings; beyond the last angle nothing is said.
func (r *rings) at(p raster.Point, direction float64) scatter {
	ring := math.Atan2(p.Y-r.centre.Y, p.X-r.centre.X) + math.Pi/2
	angle := math.Abs(math.Remainder(direction-ring, math.Pi)) * 180 / math.Pi
	last := len(ringAngles) - 1
	if angle > ringAngles[last] {
		return scatter{}
	}
	i, _ := slices.BinarySearch(ringAngles[:], angle)
	bin := distance(p, r.centre) / r.most * ringBins
	var out scatter
	for _, b := range []int{int(bin - 0.5), int(bin + 0.5)} {
		b = min(max(b, 0), ringBins-1)
		for a := max(i-1, 0); a <= min(i+1, last); a++ {
			out = out.most(r.values[b*len(ringAngles)+a])
		}
	}
	return out
}
