package cost

import (
	"math"

	"lapgate/server/volume/plan"
)

// Parts are the parts of a cost; they add up to Total. Money.
type Parts struct {
	Tooling      float64 `json:"tooling"`       // tools, repairs, first articles
	Making       float64 `json:"making"`        // starts and setups of good units shipped
	Scrap        float64 `json:"scrap"`         // same for bad units thrown away, less scrap value
	Inspection   float64 `json:"inspection"`    // looks and stations
	FalseRejects float64 `json:"false_rejects"` // making of good units thrown away, less scrap value
	Holds        float64 `json:"holds"`
	Escapes      float64 `json:"escapes"` // making of bad units shipped, and what they cost after
	Rework       float64 `json:"rework"`
}

// Total is the sum of the parts.
func (p Parts) Total() float64 {
	return p.Tooling + p.Making + p.Scrap + p.Inspection + p.FalseRejects + p.Holds + p.Escapes + p.Rework
}

// Over divides every part.
func (p Parts) Over(x float64) Parts {
	return Parts{p.Tooling / x, p.Making / x, p.Scrap / x, p.Inspection / x, p.FalseRejects / x, p.Holds / x, p.Escapes / x, p.Rework / x}
}

// Combination is one process under one inspection option in one world.
type Combination struct {
	model *Model
	maker *maker
	gate  *gate
	world *plan.World
	at    [2]int
	full  Flow // at the full lot size
	lot   float64
}

// Combination puts a process and an inspection option together.
func (m *Model) Combination(process, inspection int, w *plan.World) *Combination {
	c := &Combination{model: m, maker: &m.makers[process], gate: &m.gates[inspection], world: w, at: [2]int{process, inspection}}
	if lots := c.gate.option.ISO2859; lots != nil {
		c.lot = float64(lots.LotSize)
	}
	c.full = m.flow(process, inspection, w, int(c.lot))
	return c
}

// Flow is what becomes of a start at a quantity of good units shipped: below
// one lot the lot is that quantity.
func (c *Combination) Flow(quantity float64) Flow {
	if quantity >= c.lot {
		return c.full
	}
	return c.model.flow(c.at[0], c.at[1], c.world, max(2, int(math.Ceil(quantity))))
}

// Starts is the number of units to start for a quantity of good units
// shipped; +Inf if none ever ships.
func (c *Combination) Starts(quantity float64) float64 {
	f := c.Flow(quantity)
	return c.startsOf(&f, quantity)
}

func (c *Combination) startsOf(f *Flow, quantity float64) float64 {
	if !(f.Good > 0) {
		return math.Inf(1)
	}
	return c.maker.starts(quantity / f.Good)
}

// Parts are the parts of the total cost of a quantity of good units shipped.
// Units made beyond need by whole blocks are charged and not sold.
func (c *Combination) Parts(quantity float64) Parts {
	f := c.Flow(quantity)
	s := c.startsOf(&f, quantity)
	if math.IsInf(s, 1) {
		return Parts{Scrap: math.Inf(1)}
	}
	making, o, g := c.maker.making(s)/s, c.model.plan.Outcomes, c.gate
	looks := f.Looks * s
	return Parts{
		Tooling:      c.maker.tooling(s),
		Making:       s * f.Good * making,
		Scrap:        s * f.Scrapped * (making - o.ScrapValue),
		FalseRejects: s * f.FalseRejects * (making - o.ScrapValue),
		Inspection:   looks*g.perLook + c.stationPrice(looks, quantity),
		Holds:        s * f.Inspected * g.option.Hold.Share * g.perHold,
		Escapes:      s * f.Escapes * (making + c.model.escape),
		Rework:       s * f.ReworkCost,
	}
}

// Total is the total cost of a quantity of good units shipped. It does not
// fall with the quantity once that reaches MonotoneFrom.
func (c *Combination) Total(quantity float64) float64 { return c.Parts(quantity).Total() }

// PerGood is the cost per good unit shipped.
func (c *Combination) PerGood(quantity float64) float64 { return c.Total(quantity) / quantity }

// MonotoneFrom is the quantity from which Total does not fall: one lot where
// sampling is by lots, since code letters step with smaller ones.
func (c *Combination) MonotoneFrom() float64 { return math.Max(1, c.lot) }

// EscapesPerMillion is nonconforming units per million units shipped.
func (c *Combination) EscapesPerMillion(quantity float64) float64 {
	f := c.Flow(quantity)
	if f.Escapes == 0 {
		return 0
	}
	return 1e6 * f.Escapes / (f.Good + f.Escapes)
}

// LookCost and EscapeCost are k1 and k2 of the all-or-none rule, in money.
func (c *Combination) LookCost() float64 { return c.gate.perLook }

// EscapeCost is what one nonconforming unit shipped costs afterwards.
func (c *Combination) EscapeCost() float64 { return c.model.escape }
