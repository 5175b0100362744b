package retest

import (
	"slices"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// complete reports whether a showing would have found what is there. Failures that say
// nothing of its pictures do not matter.
func complete(e pipeline.Evidence) bool {
	e.Failures = slices.DeleteFunc(slices.Clone(e.Failures), func(f pipeline.Failure) bool { return f.Stage == "" && !ofPictures(f.Reason) })
	return len(pipeline.HoldReasons(e)) == 0
}

// ofPictures reports whether a failure of this reason leaves something unseen.
func ofPictures(reason string) bool {
	switch reason {
	case pipeline.ReasonLate, pipeline.ReasonAttempts, pipeline.ReasonOverdue, pipeline.ReasonMaster, pipeline.ReasonMasterUnit, pipeline.ReasonDirt:
		return false
	}
	return true
}

// register lays a showing over an earlier one.
func register(before, this ledger.Inspection) ledger.Registration {
	out := ledger.Registration{Against: before.ID, PreviousAttempt: before.Attempt}
	if !complete(before.Evidence) || !complete(this.Evidence) {
		return out
	}
	a, b := before.Evidence.Defects, this.Evidence.Defects
	r := pipeline.Register(a, b, settings(before.Evidence, this.Evidence))
	if !r.Known {
		return out
	}
	out.Known, out.RotationDeg, out.ShiftUUM, out.ShiftVUM, out.RMSUM = true, r.RotationDeg, r.ShiftUUM, r.ShiftVUM, r.RMSUM
	for _, p := range r.Pairs {
		out.Pairs = append(out.Pairs, ledger.DefectPair{Previous: a[p.First].ID, This: b[p.Second].ID, DistanceUM: p.DistanceUM})
	}
	for _, i := range r.Removable {
		out.Removable = append(out.Removable, a[i].ID)
	}
	for _, j := range r.Arrived {
		out.Arrived = append(out.Arrived, b[j].ID)
	}
	return out
}

func settings(before, this pipeline.Evidence) pipeline.RegisterSettings {
	s := pipeline.DefaultRegister
	if a, ok := angle(before); ok {
		if b, ok := angle(this); ok {
			turn := b - a
			s.TurnDeg = &turn
		}
	}
	return s
}

// angle is the part's, where a datum gave it.
func angle(e pipeline.Evidence) (float64, bool) {
	for _, m := range e.Measurements {
		if m.Name == pipeline.MeasuredPartAngle {
			return m.Value, true
		}
	}
	return 0, false
}

// trail follows the defects of the first showing through the later ones.
type trail struct {
	now  map[int]int // id in the first showing → id in the latest that is known
	gone map[int]bool
	at   int64 // inspection that now speaks of
}

func newTrail(first ledger.Inspection) *trail {
	t := &trail{now: map[int]int{}, gone: map[int]bool{}, at: first.ID}
	for _, d := range first.Evidence.Defects {
		t.now[d.ID] = d.ID
	}
	return t
}

// follow takes the next registration. One that is unknown, or against a showing that the
// trail does not know, leaves everything permanent that is.
func (t *trail) follow(this ledger.Inspection, r ledger.Registration) {
	if !r.Known || r.Against != t.at {
		return
	}
	next := map[int]int{}
	for first, id := range t.now {
		if slices.Contains(r.Removable, id) {
			t.gone[first] = true
			continue
		}
		for _, p := range r.Pairs {
			if p.Previous == id {
				next[first] = p.This
			}
		}
	}
	t.now, t.at = next, this.ID
}

// permanent returns the evidence of the first showing without what is gone.
func (t *trail) permanent(e pipeline.Evidence) pipeline.Evidence {
	e.Defects = slices.DeleteFunc(slices.Clone(e.Defects), func(d pipeline.Defect) bool { return t.gone[d.ID] })
	return e
}
