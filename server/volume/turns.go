package volume

// Turn is a stretch of quantities in which the cheapest combination changes
// hands: one crossover, or several in a row of the same two where costs step
// (blocks, batches, tools) and they change places more than once.
type Turn struct {
	From, To     float64 // first and last crossover; equal for one
	Changes      int
	Below, Above int // cheapest before the first and after the last crossover
	Cost         Money
	Low, High    float64 // interval of the first crossover over the draws
	Share        float64 // draws with a crossover
	SD           float64
	DeltaSD      Money
}

// Turns joins the winner turns of a result, in the order of quantity.
func (r *Result) Turns() []Turn {
	var turns []Turn
	last := -1
	for _, i := range r.winnerTurns() {
		x := &r.Crossovers[i]
		if r.opensTurn(last, i) {
			turns = append(turns, newTurn(x))
		} else {
			t := &turns[len(turns)-1]
			t.To, t.Above = x.Quantity, x.above()
			t.Changes++
		}
		last = i
	}
	return turns
}

// winnerTurns are the places of the winner turns in Crossovers.
func (r *Result) winnerTurns() []int {
	var all []int
	for i, x := range r.Crossovers {
		if x.WinnerTurn {
			all = append(all, i)
		}
	}
	return all
}

// opensTurn says whether the winner turn i is of other combinations than the
// one before it, last; below zero there is none before it.
func (r *Result) opensTurn(last, i int) bool {
	return last < 0 || r.Crossovers[last].First != r.Crossovers[i].First || r.Crossovers[last].Second != r.Crossovers[i].Second
}

// above is the cheaper combination above the crossover, below the other one.
func (x *Crossover) above() int {
	if x.FirstCheaper {
		return x.Second
	}
	return x.First
}

func (x *Crossover) below() int { return x.First + x.Second - x.above() }

func newTurn(x *Crossover) Turn {
	t := Turn{From: x.Quantity, To: x.Quantity, Changes: 1, Below: x.below(), Above: x.above(), Cost: x.Cost}
	if d := x.Distribution; d != nil {
		t.Low, t.High, t.Share, t.SD, t.DeltaSD = d.Low, d.High, d.Share, d.SD, d.DeltaSD
	}
	return t
}
