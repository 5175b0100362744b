package plan

// Knowledge is everything a plan is unsure of, in one fixed order: for each
// inspection its false rejects and misses, for each process its yield as
// measured, for each rework route its success.
type Knowledge struct {
	Beliefs []Belief
	Names   []string // as in the file: inspections.ring.miss
	plan    *Plan
	gates   []int // per process: the inspection behind a measured yield, or -1
	// errorsOf is, per inspection, the one whose misses and false rejects it has.
	errorsOf []int
}

// Know collects the beliefs of a validated and resolved plan.
func Know(p *Plan) (*Knowledge, error) {
	if err := p.Unresolved(); err != nil {
		return nil, err
	}
	k := &Knowledge{plan: p}
	for i := range p.Inspections {
		if err := k.addInspection(&p.Inspections[i]); err != nil {
			return nil, err
		}
		if same := p.InspectionIndex(p.Inspections[i].SameErrorsAs); same >= 0 {
			i = same
		}
		k.errorsOf = append(k.errorsOf, i)
	}
	for i := range p.Processes {
		k.addProcess(&p.Processes[i])
	}
	for i := range p.Reworks {
		k.add("reworks."+p.Reworks[i].Name+".success", p.Reworks[i].Success.Belief())
	}
	return k, nil
}

func (k *Knowledge) add(name string, b Belief) {
	k.Names, k.Beliefs = append(k.Names, name), append(k.Beliefs, b)
}

func (k *Knowledge) addInspection(option *Inspection) error {
	falseReject, miss := option.FalseReject.Belief(), option.Miss.Belief()
	if ref := option.Study; ref != nil {
		falseReject = FromCount(Count{ref.Resolved.FalseCalls.Called, ref.Resolved.FalseCalls.Shown})
		var err error
		if miss, err = ref.miss(); err != nil {
			return err
		}
	}
	k.add("inspections."+option.Name+".false_reject", falseReject)
	k.add("inspections."+option.Name+".miss", miss)
	return nil
}

func (k *Knowledge) addProcess(process *Process) {
	y, gate := process.Yield, -1
	belief := Share{y.Value, y.Count, y.Beta}.Belief()
	if y.Ledger != nil {
		belief = FromCount(Count{y.Counts.Accepted, y.Counts.Accepted + y.Counts.Rejected})
		gate = k.plan.InspectionIndex(y.Ledger.Gate)
	}
	k.gates = append(k.gates, gate)
	k.add("processes."+process.Name+".yield", belief)
}

// World is one possible truth of a plan.
type World struct {
	Yield                  []float64 // per process, before inspection, corrected
	FalseReject, Miss      []float64 // per inspection, one look
	Success                []float64 // per rework route
	Uncorrectable, Clipped bool      // see Knowledge.World
}

// World turns one value per belief into a world. Yields measured behind a
// gate are corrected by Rogan and Gladen with the same world's gate. Where
// that gate tells nothing (Uncorrectable) the yield stays as measured; where
// the correction leaves 0..1 it is held there (Clipped).
func (k *Knowledge) World(values []float64) World {
	var w World
	for _, i := range k.errorsOf {
		w.FalseReject = append(w.FalseReject, values[2*i])
		w.Miss = append(w.Miss, values[2*i+1])
	}
	rest := values[2*len(k.plan.Inspections):]
	for i, gate := range k.gates {
		w.Yield = append(w.Yield, w.correct(rest[i], gate))
	}
	w.Success = rest[len(k.gates):]
	return w
}

func (w *World) correct(measured float64, gate int) float64 {
	if gate < 0 {
		return measured
	}
	bad, err := RoganGladen(1-measured, w.FalseReject[gate], w.Miss[gate])
	if err != nil {
		w.Uncorrectable = true
		return measured
	}
	w.Clipped = w.Clipped || bad == 0 || bad == 1
	return 1 - bad
}

// Values are the best single figures, in the order of Beliefs.
func (k *Knowledge) Values() []float64 {
	values := make([]float64, len(k.Beliefs))
	for i, b := range k.Beliefs {
		values[i] = b.Value()
	}
	return values
}

// YieldIndex is the place of a process's measured yield in Beliefs.
func (k *Knowledge) YieldIndex(process int) int { return 2*len(k.plan.Inspections) + process }

// Gate is the inspection behind a process's measured yield, or -1.
func (k *Knowledge) Gate(process int) int { return k.gates[process] }
