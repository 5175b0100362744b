package cost

import (
	"math"

	"lapgate/server/volume/plan"
	"lapgate/server/volume/sampling"
)

// Flow is what becomes of one start, in units per start (expected values).
// Good + Escapes + FalseRejects + Scrapped = 1.
type Flow struct {
	Good         float64 // conforming, shipped
	Escapes      float64 // nonconforming, shipped
	FalseRejects float64 // conforming, thrown away
	Scrapped     float64 // nonconforming, thrown away
	Inspected    float64 // units shown to the inspection, reworked ones again
	Looks        float64 // looks, of which a unit may get several
	Reworked     float64 // units reworked
	ReworkCost   float64 // money
}

// units is a mass of good and bad units.
type units struct{ good, bad float64 }

func (u units) sum() float64 { return u.good + u.bad }

func (u units) times(x float64) units { return units{u.good * x, u.bad * x} }

// looker is one inspection in one world: what a full inspection of a unit does.
type looker struct {
	falseReject, miss   float64 // of the whole procedure
	goodLooks, badLooks float64 // looks per unit
}

// lookerFor combines looks. With probability same a second look repeats the
// first; otherwise it is independent. Either rejects: the unit passes only if
// both looks accept. Majority: a third look decides where two differ.
func (g *gate) lookerFor(falseReject, miss float64) looker {
	independent := 1 - g.same
	switch g.option.Kind {
	case plan.TwiceEither:
		return looker{
			falseReject: g.same*falseReject + independent*(1-(1-falseReject)*(1-falseReject)),
			miss:        g.same*miss + independent*miss*miss,
			goodLooks:   2, badLooks: 2,
		}
	case plan.TwiceMajority:
		return looker{
			falseReject: g.same*falseReject + independent*falseReject*falseReject*(3-2*falseReject),
			miss:        g.same*miss + independent*miss*miss*(3-2*miss),
			goodLooks:   2 + independent*2*falseReject*(1-falseReject),
			badLooks:    2 + independent*2*miss*(1-miss),
		}
	}
	return looker{falseReject, miss, 1, 1}
}

// inspect shows every unit to the inspection and gives back the rejected.
func (l looker) inspect(f *Flow, shown units) (rejected units) {
	f.Inspected += shown.sum()
	f.Looks += shown.good*l.goodLooks + shown.bad*l.badLooks
	f.Good += shown.good * (1 - l.falseReject)
	f.Escapes += shown.bad * l.miss
	return units{shown.good * l.falseReject, shown.bad * (1 - l.miss)}
}

func (f *Flow) ship(u units) { f.Good, f.Escapes = f.Good+u.good, f.Escapes+u.bad }

func (f *Flow) scrap(u units) {
	f.FalseRejects, f.Scrapped = f.FalseRejects+u.good, f.Scrapped+u.bad
}

// flow follows one start of a process through an inspection option; lot is
// the number of units in a lot.
func (m *Model) flow(process, inspection int, w *plan.World, lot int) Flow {
	g := &m.gates[inspection]
	y := w.Yield[process]
	made, f := units{y, 1 - y}, Flow{}
	l := g.lookerFor(w.FalseReject[inspection], w.Miss[inspection])
	switch g.option.Kind {
	case plan.None:
		f.ship(made)
		return f
	case plan.ISO2859:
		m.inspectLot(&f, g, l, w, made, lot)
	case plan.CSP:
		c := sampling.CSP1{Clearance: g.option.CSP1.Clearance, Fraction: g.option.CSP1.Fraction}
		share := c.FractionInspected(apparent(l, made))
		f.ship(made.times(1 - share))
		m.settle(&f, g, l, w, l.inspect(&f, made.times(share)))
	default:
		m.settle(&f, g, l, w, l.inspect(&f, made))
	}
	return f
}

// apparent is the share of inspected units that are rejected.
func apparent(l looker, made units) float64 { return made.good*l.falseReject + made.bad*(1-l.miss) }

// inspectLot is ISO 2859-1: the sample is inspected, and the rest as the lot's
// fate demands. Units of the rest are independent of the sample, so expected
// numbers are products. A lot no larger than its sample is inspected whole.
func (m *Model) inspectLot(f *Flow, g *gate, l looker, w *plan.World, made units, lot int) {
	s := g.lotPlan(lot)
	sampled := math.Min(1, float64(s.N)/float64(lot))
	if sampled >= 1 {
		m.settle(f, g, l, w, l.inspect(f, made))
		return
	}
	p := apparent(l, made)
	accept := s.AcceptProbability(p)
	if g.option.ISO2859.RejectedLots == plan.ScrapLot {
		scrapLots(f, l, made, sampled, accept, sampling.BinomialAtMost(s.Accept, s.N-1, p))
		return
	}
	inspected := sampled + (1-accept)*(1-sampled)
	f.ship(made.times(1 - inspected))
	m.settle(f, g, l, w, l.inspect(f, made.times(inspected)))
}

// scrapLots throws rejected lots away whole. A unit of the sample that passes
// ships when the other N-1 leave the lot accepted: probability othersAccept.
func scrapLots(f *Flow, l looker, made units, sampled, accept, othersAccept float64) {
	seen := Flow{}
	l.inspect(&seen, made.times(sampled))
	f.Inspected, f.Looks = seen.Inspected, seen.Looks
	f.ship(units{seen.Good, seen.Escapes}.times(othersAccept))
	f.ship(made.times((1 - sampled) * accept))
	f.scrap(units{made.good - f.Good, made.bad - f.Escapes})
}

// settle sends rejected units along the rework routes until scrap.
func (m *Model) settle(f *Flow, g *gate, l looker, w *plan.World, rejected units) {
	for r := g.route; r >= 0; r = m.routes[r].then {
		n := rejected.sum()
		f.Reworked += n
		f.ReworkCost += n * m.routes[r].cost
		mended := rejected.bad * w.Success[r]
		rejected = l.inspect(f, units{rejected.good + mended, rejected.bad - mended})
	}
	f.scrap(rejected)
}
