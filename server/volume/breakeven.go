package volume

import (
	"fmt"
	"math"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// BreakEven is the answer to: at which value of one unknown do two
// combinations cost the same at a quantity?
type BreakEven struct {
	Unknown  string      `json:"unknown"`
	First    Combination `json:"first"`
	Second   Combination `json:"second"`
	Quantity float64     `json:"good_units"`
	Now      float64     `json:"value_now"`
	From     float64     `json:"searched_from"`
	To       float64     `json:"searched_to"`
	Values   []Root      `json:"values"` // empty: none in the searched range
}

// Root is one value where the cheaper combination changes.
type Root struct {
	Value        float64 `json:"value"`
	Cost         Money   `json:"cost"`                      // per good unit shipped there
	FirstCheaper bool    `json:"first_cheaper_below_value"` // the first is the cheaper one below Value
	Jump         bool    `json:"jump"`                      // a step of a cost, not a meeting of lines
}

// SolveBreakEven finds every value of an unknown, in its allowed range, where
// two combinations cost the same per good unit shipped at a quantity. Values
// closer together than the search grid (1/2000 of a share's range, 2 % of an
// amount) may be missed in pairs. The plan is left as it was.
func SolveBreakEven(p *plan.Plan, unknown string, first, second Combination, quantity float64) (*BreakEven, error) {
	if err := p.Validate(); err != nil {
		return nil, err
	}
	if !(quantity >= 1 && quantity <= 1e9) {
		return nil, fmt.Errorf("quantity %v; allowed: 1 to 1e9 good units", quantity)
	}
	u, err := p.Unknown(unknown)
	if err != nil {
		return nil, err
	}
	s := &balance{plan: p, unknown: u, quantity: quantity, model: &cost.Model{}}
	if s.first, err = find(p, first); err != nil {
		return nil, err
	}
	if s.second, err = find(p, second); err != nil {
		return nil, err
	}
	b := &BreakEven{Unknown: unknown, First: first, Second: second, Quantity: quantity, Now: u.Now, From: u.From, To: u.To}
	return b, s.solve(b)
}

func find(p *plan.Plan, c Combination) ([2]int, error) {
	at := [2]int{p.ProcessIndex(c.Process), p.InspectionIndex(c.Inspection)}
	if at[0] < 0 || at[1] < 0 {
		return at, fmt.Errorf("no combination %s in the plan; write PROCESS/INSPECTION", c)
	}
	return at, nil
}

// balance is the cost difference of two combinations as a function of the
// unknown.
type balance struct {
	plan          *plan.Plan
	unknown       *plan.Unknown
	first, second [2]int
	quantity      float64
	model         *cost.Model // of the last value tried
}

func (s *balance) at(value float64) (point, error) {
	changed := s.unknown.With(value)
	for i := range changed.Inspections {
		if changed.Inspections[i].Station.Charge != plan.Dedicated {
			changed.Inspections[i].Station.MaxWaitS = 0 // not charged, and slow to solve
		}
	}
	k, err := plan.Know(changed)
	if err != nil {
		return point{}, err
	}
	m, err := s.model.With(changed)
	if err != nil {
		return point{}, err
	}
	s.model = m
	w := k.World(k.Values())
	return point{value, m.Combination(s.first[0], s.first[1], &w).PerGood(s.quantity),
		m.Combination(s.second[0], s.second[1], &w).PerGood(s.quantity)}, nil
}

// solve scans the range and bisects each change of sign.
func (s *balance) solve(b *BreakEven) error {
	last, err := s.at(s.unknown.Point(0))
	if err != nil {
		return err
	}
	sign := last.sign()
	for i := 1; i <= plan.UnknownPoints; i++ {
		next, err := s.at(s.unknown.Point(i))
		if err != nil {
			return err
		}
		if n := next.sign(); n != 0 {
			if n == -sign {
				root, err := s.refine(last, next, n)
				if err != nil {
					return err
				}
				b.Values = append(b.Values, root)
			}
			sign = n
		}
		last = next
	}
	return nil
}

func (s *balance) refine(low, high point, sign float64) (Root, error) {
	for range 100 {
		middle := (low.quantity + high.quantity) / 2
		if middle <= low.quantity || middle >= high.quantity {
			break
		}
		p, err := s.at(middle)
		if err != nil {
			return Root{}, err
		}
		if p.sign() == sign {
			high = p
		} else {
			low = p
		}
	}
	step := math.Abs((high.a - high.b) - (low.a - low.b))
	return Root{high.quantity, Money(high.a), sign > 0, step > 1e-7*high.a}, nil
}
