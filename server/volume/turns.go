package volume

// Turn is a stretch of quantities in which two combinations change places: one
// crossover, or several where costs step (blocks, batches, tools) and they
// change places more than once.
type Turn struct {
	From, To     float64 // first and last crossover; equal for one
	Changes      int
	Below, Above int // the cheaper of the two before the first and after the last crossover
	Cost         Money
	Distribution CrossingDistribution // of the first crossover
}

// Turns joins the crossovers where the cheapest combination of all changes
// hands, in the order of quantity. Several in a row of the same two are one.
func (r *Result) Turns() []Turn {
	var turns []Turn
	last := -1
	for _, i := range r.winnerTurns() {
		if r.opensTurn(last, i) {
			turns = append(turns, newTurn(&r.Crossovers[i]))
		} else {
			turns[len(turns)-1].extend(&r.Crossovers[i])
		}
		last = i
	}
	return turns
}

// OtherTurns joins all other crossovers, pair by pair, in the order of the
// first of each.
func (r *Result) OtherTurns() []Turn {
	var turns []Turn
	at := map[[2]int]int{}
	for i := range r.Crossovers {
		x := &r.Crossovers[i]
		if x.WinnerTurn {
			continue
		}
		pair := [2]int{x.First, x.Second}
		if known, ok := at[pair]; ok {
			turns[known].extend(x)
			continue
		}
		at[pair] = len(turns)
		turns = append(turns, newTurn(x))
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

// Above is the cheaper combination of the two above the crossover.
func (x *Crossover) Above() int { return x.First + x.Second - x.Below() }

// Below is the cheaper combination of the two below the crossover.
func (x *Crossover) Below() int {
	if x.FirstCheaper {
		return x.First
	}
	return x.Second
}

func newTurn(x *Crossover) Turn {
	return Turn{From: x.Quantity, To: x.Quantity, Changes: 1, Below: x.Below(), Above: x.Above(), Cost: x.Cost, Distribution: *x.Distribution}
}

func (t *Turn) extend(x *Crossover) { t.To, t.Above, t.Changes = x.Quantity, x.Above(), t.Changes+1 }
