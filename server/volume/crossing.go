package volume

import "math"

// Curve is the total cost of a quantity of good units shipped, in money.
type Curve struct {
	Total        func(quantity float64) float64
	MonotoneFrom float64 // from here on Total does not fall
}

// Crossing is a quantity where the cheaper of two curves changes.
type Crossing struct {
	Quantity     float64 `json:"quantity"`
	FirstCheaper bool    `json:"first_cheaper_below"` // the first curve is the cheaper one below Quantity
	Jump         bool    `json:"jump"`                // a step of a cost, not a meeting of lines
}

// Crossings finds every crossing of two curves between whole quantities from
// and to. It halves the range until a part is certain: where a(low) > b(high)
// and both never fall, a is the dearer one throughout. Parts one unit wide
// with a change of sign are solved by bisection. Below the quantity from
// which both are monotone every unit is looked at. complete is false when
// budget evaluations did not suffice.
func Crossings(a, b Curve, from, to float64, budget int) (found []Crossing, complete bool) {
	s := &search{a: a, b: b, left: budget, within: 1e-10, scan: math.Max(a.MonotoneFrom, b.MonotoneFrom)}
	low, high := s.at(math.Ceil(from)), s.at(math.Floor(to))
	if low.quantity >= high.quantity {
		return nil, true
	}
	s.split(low, high)
	return s.found, s.left > 0
}

type search struct {
	a, b     Curve
	scan     float64
	left     int
	within   float64 // share of a quantity to which a crossing is bisected
	found    []Crossing
	lastSign float64 // last sign that was not a tie
}

type point struct{ quantity, a, b float64 }

func (s *search) at(quantity float64) point {
	s.left--
	return point{quantity, s.a.Total(quantity), s.b.Total(quantity)}
}

// sign is +1 where a is dearer, -1 where b is, 0 for a tie within rounding.
func (p point) sign() float64 {
	d := p.a - p.b
	if math.IsNaN(d) || math.Abs(d) <= 1e-12*(math.Abs(p.a)+math.Abs(p.b)) {
		return 0
	}
	return math.Copysign(1, d)
}

// split works from left to right, so lastSign is that of the units before.
func (s *search) split(low, high point) {
	if s.left <= 0 {
		return
	}
	width := high.quantity - low.quantity
	if certain := low.a > high.b || high.a < low.b; width > 1 && (!certain || low.quantity < s.scan) {
		middle := s.at(between(low.quantity, high.quantity))
		s.split(low, middle)
		s.split(middle, high)
		return
	}
	if sign := low.sign(); sign != 0 {
		s.lastSign = sign
	}
	if sign := high.sign(); sign != 0 {
		if s.lastSign == -sign {
			s.found = append(s.found, s.refine(low, high, sign))
		}
		s.lastSign = sign
	}
}

// between is the whole quantity nearest the geometric middle.
func between(low, high float64) float64 {
	return math.Min(high-1, math.Max(low+1, math.Round(math.Sqrt(low*high))))
}

// refine bisects for the change to sign.
func (s *search) refine(low, high point, sign float64) Crossing {
	for range 60 {
		middle := s.at((low.quantity + high.quantity) / 2)
		if high.quantity-low.quantity < s.within*high.quantity {
			break
		}
		if middle.sign() == sign {
			high = middle
		} else {
			low = middle
		}
	}
	step := math.Abs((high.a - high.b) - (low.a - low.b))
	return Crossing{high.quantity, sign > 0, step > 1e-7*math.Max(1e-300, high.a)}
}
