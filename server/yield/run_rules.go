package yield

import (
	"fmt"
	"math"
)

// RunRule is one pattern of points that a stable process makes seldom. Counts are skewed: on a chart of
// small counts every rule but the first signals more often on one side than its authors worked out for normal data.
type RunRule string

// The rules, with the place each has in Western Electric 1956 and Nelson 1984.
const (
	OneBeyond3     RunRule = "one_beyond_3_sigma"       // Western Electric 1, Nelson 1
	TwoOf3Beyond2  RunRule = "two_of_3_beyond_2_sigma"  // Western Electric 2, Nelson 5; on one side
	FourOf5Beyond1 RunRule = "four_of_5_beyond_1_sigma" // Western Electric 3, Nelson 6; on one side
	EightOneSide   RunRule = "eight_on_one_side"        // Western Electric 4
	NineOneSide    RunRule = "nine_on_one_side"         // Nelson 2
)

// pattern is "at least need of the last window points beyond distance sigmas on one side, the newest among them".
type pattern struct {
	need, window int
	distance     float64
}

func (r RunRule) pattern() (pattern, error) {
	switch r {
	case OneBeyond3:
		return pattern{1, 1, 3}, nil
	case TwoOf3Beyond2:
		return pattern{2, 3, 2}, nil
	case FourOf5Beyond1:
		return pattern{4, 5, 1}, nil
	case EightOneSide:
		return pattern{8, 8, 0}, nil
	case NineOneSide:
		return pattern{9, 9, 0}, nil
	}
	return pattern{}, fmt.Errorf("run rule %q: want one of %q, %q, %q, %q, %q", r,
		OneBeyond3, TwoOf3Beyond2, FourOf5Beyond1, EightOneSide, NineOneSide)
}

// Signals gives the 0-based index of every point that completes the rule's pattern. z is the points' distance
// from the centre in sigmas (Chart.Standardized). A point exactly at a distance is not beyond it, so one on the centre ends a run.
func Signals(rule RunRule, z []float64) ([]int, error) {
	p, err := rule.pattern()
	if err != nil {
		return nil, err
	}
	var signals []int
	for i := range z {
		if p.completes(z[max(0, i-p.window+1):i+1], 1) || p.completes(z[max(0, i-p.window+1):i+1], -1) {
			signals = append(signals, i)
		}
	}
	return signals, nil
}

func (p pattern) completes(last []float64, side float64) bool {
	if !(side*last[len(last)-1] > p.distance) {
		return false
	}
	beyond := 0
	for _, z := range last {
		if side*z > p.distance {
			beyond++
		}
	}
	return beyond >= p.need
}

// RunLengthWithRuns is the run length at the true rate when a run of length points on one side of the centre
// signals as well as a point outside. With up and down the probabilities of a point inside and above or below the
// centre, on that of one at the centre, and A = Σ up^i, B = Σ down^i for i = 0 … length-2,
//
//	1 / (1 - on - up·A/(1+up·A) - down·B/(1+down·B))
func (l Limits) RunLengthWithRuns(rate float64, length int) (float64, error) {
	if length < 2 {
		return 0, fmt.Errorf("run of %d points: want two or more", length)
	}
	if err := checkLimits(l.Kind, rate, l.Size); err != nil {
		return 0, err
	}
	least, most := l.inside()
	below, above := l.besideCentre()
	down := l.atMost(below, rate) - l.atMost(least-1, rate)
	up := l.atLeast(above, rate) - l.atLeast(most+1, rate)
	return runLengthWithRuns(up, down, math.Max(0, 1-up-down-l.signalAt(rate)), length), nil
}

// besideCentre gives the greatest count below the centre and the least above it.
func (l Limits) besideCentre() (below, above int) {
	above = max(0, int(l.Centre*l.Size)-1)
	for float64(above)/l.Size <= l.Centre {
		above++
	}
	below = above - 1
	for below >= 0 && float64(below)/l.Size >= l.Centre {
		below--
	}
	return below, above
}

func runLengthWithRuns(up, down, on float64, length int) float64 {
	return 1 / (1 - on - runShare(up, length) - runShare(down, length))
}

// runShare is q A / (1 + q A) with A = 1 + q + … + q^(length-2).
func runShare(q float64, length int) float64 {
	sum := 0.0
	for range length - 1 {
		sum = q * (1 + sum)
	}
	return sum / (1 + sum)
}
