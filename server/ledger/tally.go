package ledger

import (
	"slices"

	"lapgate/pipeline"
)

// cell is what a roll-up counts by within a bucket.
type cell struct {
	part, surface, process, lot, line, station, recipe, purpose string
}

// cellVerdict is a row of the roll-up by verdict; verdict may also be inRework.
type cellVerdict struct {
	cell
	verdict pipeline.Verdict
}

// inRework is the last word of a unit that was sent round again and not shown since.
const inRework pipeline.Verdict = "rework"

type verdictCounts struct {
	showings    int64 // showings with this verdict
	first       int64 // first attempts with this verdict
	final       int64 // units whose last word this is
	attempts    int64 // showings of the units in final
	binned      int64 // showings whose last reported bin this is
	firstBinned int64 // first attempts whose last reported bin this is
	// retestAccepts are first attempts with this verdict, not accept, that a later attempt
	// of the unit was accepted after
	retestAccepts int64
	permanent     int64 // first attempts that would have this verdict by their permanent defects alone
}

type cellReason struct {
	cellVerdict
	reason string
}

type reasonCounts struct {
	showings, principal, first, firstPrincipal int64
	removable                                  int64 // of first: without this reason by their permanent defects alone
}

// rawShowing is what counting needs to know of a showing.
type rawShowing struct {
	id        int64
	unit      stationKey
	cell      cell
	attempt   int
	countedUS int64
	verdict   pipeline.Verdict
	decision  Decision
	bin       pipeline.Verdict
	reasons   []string // names, each once, in order
	// What a later showing says of the unit's first one; empty = nothing.
	permanent        pipeline.Verdict
	permanentReasons []string
}

// lastWord is the verdict, or what a person made of it.
func (r rawShowing) lastWord() pipeline.Verdict {
	switch r.decision {
	case DecideAccept, DecideReject:
		return pipeline.Verdict(r.decision)
	case DecideClean, DecideRework:
		return inRework
	}
	return r.verdict
}

// tally counts the showings of one bucket.
type tally struct {
	fromUS, toUS int64
	verdicts     map[cellVerdict]*verdictCounts
	reasons      map[cellReason]*reasonCounts
}

func newTally(fromUS, toUS int64) *tally {
	return &tally{fromUS, toUS, map[cellVerdict]*verdictCounts{}, map[cellReason]*reasonCounts{}}
}

// add counts all showings of one unit's surface at one kind of station, in order of
// attempt and time. The unit counts in the bucket and cell of its earliest showing on
// record, so that first-pass and final yield speak of the same units.
func (t *tally) add(unit []rawShowing) {
	entry, last := unit[0], unit[len(unit)-1]
	if t.holds(entry) {
		f := t.verdict(entry.cell, last.lastWord())
		f.final++
		f.attempts += int64(len(unit))
		if entry.attempt == 1 && entry.verdict != pipeline.Accept && acceptedLater(unit) {
			t.verdict(entry.cell, entry.verdict).retestAccepts++
		}
	}
	for i, r := range unit {
		if t.holds(r) {
			t.addShowing(r, i == 0 && r.attempt == 1)
		}
	}
	if t.holds(entry) && entry.attempt == 1 {
		t.addPermanent(entry, unit)
	}
}

// addPermanent counts the first showing by its permanent defects alone: as the latest
// showing that knows says, or else all of its defects are permanent.
func (t *tally) addPermanent(entry rawShowing, unit []rawShowing) {
	verdict, reasons := entry.verdict, entry.reasons
	for _, r := range unit {
		if r.permanent != "" {
			verdict, reasons = r.permanent, r.permanentReasons
		}
	}
	t.verdict(entry.cell, verdict).permanent++
	for _, name := range entry.reasons {
		if !slices.Contains(reasons, name) {
			t.reason(cellReason{cellVerdict{entry.cell, entry.verdict}, name}).removable++
		}
	}
}

// acceptedLater reports whether the line accepted a showing after the first.
func acceptedLater(unit []rawShowing) bool {
	return slices.ContainsFunc(unit[1:], func(r rawShowing) bool { return r.verdict == pipeline.Accept })
}

func (t *tally) addShowing(r rawShowing, first bool) {
	c := t.verdict(r.cell, r.verdict)
	c.showings++
	c.first += flag(first)
	if r.bin != "" {
		b := t.verdict(r.cell, r.bin)
		b.binned++
		b.firstBinned += flag(first)
	}
	for i, name := range r.reasons {
		n := t.reason(cellReason{cellVerdict{r.cell, r.verdict}, name})
		n.showings++
		n.first += flag(first)
		n.principal += flag(i == 0)
		n.firstPrincipal += flag(first && i == 0)
	}
}

func (t *tally) holds(r rawShowing) bool { return r.countedUS >= t.fromUS && r.countedUS < t.toUS }

func (t *tally) verdict(c cell, v pipeline.Verdict) *verdictCounts {
	k := cellVerdict{c, v}
	if t.verdicts[k] == nil {
		t.verdicts[k] = &verdictCounts{}
	}
	return t.verdicts[k]
}

func (t *tally) reason(k cellReason) *reasonCounts {
	if t.reasons[k] == nil {
		t.reasons[k] = &reasonCounts{}
	}
	return t.reasons[k]
}
