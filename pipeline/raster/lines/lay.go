package lines

import (
	"math"
	"math/rand/v2"
	"slices"

	"lapgate/pipeline/raster"
)

// LayKind is how the lines of a lay run.
type LayKind int

// The kinds of lay.
const (
	NoLay LayKind = iota
	Straight
	Concentric // about Settings.Centre
)

// Lay is the texture that the spread of the line sums shows.
type Lay struct {
	Kind     LayKind
	Angle    float64 // of straight lines, degrees from +x towards +y, −90 < angle <= 90
	Period   float64 // px from line to line, that of the strongest spatial frequency
	Contrast float64 // root mean square, sigmas of a pixel
}

// layLeast is how many times the sums along straight lay scatter more than those of the
// median direction, at least.
const layLeast = 2

// lay says what made the sums of some slopes scatter.
func (f *finder) lay() Lay {
	angle, most, median := f.spread.direction()
	l := Lay{Contrast: math.Sqrt(max(most-median, 0) / rows)}
	switch {
	case f.rings != nil:
		l = Lay{Kind: Concentric, Contrast: f.rings.contrast()}
	case most >= layLeast*median && most > 1.5:
		l.Kind, l.Angle = Straight, fold(angle)
	default:
		return Lay{}
	}
	l.Period = f.period(l) * f.scale()
	return l
}

// direction returns the angle (degrees) along which sums scatter most, their mean variance
// over all places, and that of the median angle.
func (s *spread) direction() (angle, most, median float64) {
	var all []float64
	for axis := range s.axes {
		for flipped := range 2 {
			for bin := range bins {
				v := s.axes[axis].mean(flipped, bin)
				all = append(all, v)
				if v > most {
					most, angle = v, binAngle(axis, flipped, bin)
				}
			}
		}
	}
	return angle, most, middle(all)
}

// mean is over all strips and tiles.
func (a *axisSpread) mean(flipped, bin int) float64 {
	sum := 0.
	for strip := range a.first {
		for tile := range a.tiles {
			sum += float64(a.of(strip)[(flipped*a.tiles+tile)*levels*bins+bin])
		}
	}
	return sum / float64(len(a.first)*a.tiles)
}

func binAngle(axis, flipped, bin int) float64 {
	slope := float64(bin*rows/bins) / (rows - 1)
	if flipped == 1 {
		slope = -slope
	}
	if axis == 0 {
		return math.Atan2(1, slope) * 180 / math.Pi
	}
	return math.Atan(slope) * 180 / math.Pi
}

// contrast is by lines along the rings, of the middle one.
func (r *rings) contrast() float64 {
	var v []float64
	for i := range ringBins {
		v = append(v, r.values[i*len(ringAngles)][1])
	}
	return math.Sqrt(max(middle(v)-1, 0) / (rows / 2))
}

// The period is told on stretches across the lay, a sum along it at every pixel.
const (
	layStretch   = 256 // px
	layPlaces    = 12
	layPositions = 48  // of each sum
	lowest       = 8   // half cycles on a stretch: a period of 64 px
	highest      = 204 // one of 2.5 px
)

// period returns the px of the strongest tone across the lay.
func (f *finder) period(l Lay) float64 {
	random := rand.New(rand.NewPCG(2, 2)) // of the places looked at: the same each time
	power := make([]float64, highest+1)
	for range layPlaces {
		at := raster.Point{X: float64(f.work.width) * random.Float64(), Y: float64(f.work.height) * random.Float64()}
		along := l.Angle * math.Pi / 180
		if l.Kind == Concentric {
			along = math.Atan2(at.Y-f.s.Centre.Y, at.X-f.s.Centre.X) + math.Pi/2
		}
		addPower(power, f.across(at, along))
	}
	best := lowest
	for k := lowest; k <= highest; k++ {
		if power[k] > power[best] {
			best = k
		}
	}
	return 2 * layStretch / float64(best)
}

// across returns sums along an angle through the pixels of a stretch across it.
func (f *finder) across(at raster.Point, along float64) []float64 {
	sin, cos := math.Sincos(along)
	out := make([]float64, layStretch)
	for i := range out {
		d := float64(i - layStretch/2)
		out[i], _ = f.through(raster.Point{X: at.X - d*sin, Y: at.Y + d*cos}, along, layPositions)
	}
	return out
}

// addPower adds the power of v at frequencies of k half cycles over its length.
func addPower(power, v []float64) {
	level := mean(v)
	for k := range power {
		re, im := 0., 0.
		for i, x := range v {
			sin, cos := math.Sincos(math.Pi * float64(k) * float64(i) / float64(len(v)))
			re, im = re+(x-level)*cos, im+(x-level)*sin
		}
		power[k] += re*re + im*im
	}
}

// middle sorts v and returns the upper of its middle two.
func middle(v []float64) float64 {
	slices.Sort(v)
	return v[len(v)/2]
}
