package ledger

import (
	"context"
	"time"

	"lapgate/pipeline"
)

// Dimension is something that counts can be grouped by.
type Dimension string

// The dimensions.
const (
	ByPart    Dimension = "part"
	BySurface Dimension = "surface"
	ByProcess Dimension = "process"
	ByLot     Dimension = "lot"
	ByLine    Dimension = "line"
	ByStation Dimension = "station"
	ByRecipe  Dimension = "recipe"
	ByPurpose Dimension = "purpose"
)

// Dimensions lists the dimensions in a fixed order.
func Dimensions() []Dimension {
	return []Dimension{ByPart, BySurface, ByProcess, ByLot, ByLine, ByStation, ByRecipe, ByPurpose}
}

// Question asks for counts. Of the filter, Unit, Verdict, NotJudgedBy and Shard cannot be
// used; From and To must be whole multiples of Bucket.
type Question struct {
	Filter
	GroupBy []Dimension
	Every   time.Duration // length of a time group, a multiple of Bucket; 0 = no time groups
	Origin  time.Time     // any start of a time group, such as a local midnight; zero = 1970-01-01 UTC
}

// Group names what a row of counts is about.
type Group struct {
	Of    map[Dimension]string // for each dimension of GroupBy
	Start time.Time            // of the time group; zero without Every
}

// Tally counts by verdict.
type Tally struct{ Accept, Reject, Hold int64 }

// Total returns the sum.
func (t Tally) Total() int64 { return t.Accept + t.Reject + t.Hold }

// Final counts units by their last word: the disposition of the last showing, or its
// verdict. Open (holds nobody has closed) and Rework (sent round and not shown since) may
// still go either way: final yield lies between Accept and Accept + Open + Rework.
type Final struct{ Accept, Reject, Open, Rework int64 }

// Total returns the sum.
func (f Final) Total() int64 { return f.Accept + f.Reject + f.Open + f.Rework }

// Counts are exact. A unit here is one surface of a unit at one kind of station. First,
// Final, Attempts and FirstBinned speak of units that entered, that is were shown for the
// first time on record, in the group; Showings and Binned of everything shown in it. A
// unit whose attempt 1 is not on record is in Final and not in First.
type Counts struct {
	Group
	Showings    Tally // by the line's verdict
	First       Tally // first attempts by the line's verdict: a hold is no pass
	Final       Final
	Attempts    int64 // showings, whenever they were, of the units in Final
	Binned      Tally // by the bin that the line reported, where it did
	FirstBinned Tally // first attempts by that bin
	// RetestAccepts are units of First that were not accepted there and were by the line at
	// a later attempt, by the first attempt's verdict; Accept is always 0.
	RetestAccepts Tally
	// Permanent are the units of First by what their first attempt is worth when the defects
	// that a later showing proved removable are left out; all others count as permanent.
	Permanent Tally
}

// Counts answers a question, one row per group that holds anything, in order of time and
// of the dimensions.
func (s *Store) Counts(ctx context.Context, q Question) ([]Counts, error) {
	var out []Counts
	var v pipeline.Verdict
	var n verdictCounts
	a := answer{table: `rollup_verdicts`, keys: []string{`i.verdict`},
		sums: []string{`showings`, `first_pass`, `final`, `attempts`, `binned`, `first_binned`, `retest_accepts`, `permanent`},
		into: []any{&v, &n.showings, &n.first, &n.final, &n.attempts, &n.binned, &n.firstBinned, &n.retestAccepts, &n.permanent}}
	err := s.ask(ctx, q, a, func(g Group) {
		if len(out) == 0 || !out[len(out)-1].Group.equal(g) {
			out = append(out, Counts{Group: g})
		}
		out[len(out)-1].add(v, n)
	})
	return out, err
}

func (c *Counts) add(v pipeline.Verdict, n verdictCounts) {
	c.Attempts += n.attempts
	c.Permanent.set(v, n.permanent)
	switch v {
	case pipeline.Accept:
		c.Showings.Accept, c.First.Accept, c.Final.Accept = n.showings, n.first, n.final
		c.Binned.Accept, c.FirstBinned.Accept = n.binned, n.firstBinned
	case pipeline.Reject:
		c.Showings.Reject, c.First.Reject, c.Final.Reject = n.showings, n.first, n.final
		c.Binned.Reject, c.FirstBinned.Reject = n.binned, n.firstBinned
		c.RetestAccepts.Reject = n.retestAccepts
	case pipeline.Hold:
		c.Showings.Hold, c.First.Hold, c.Final.Open = n.showings, n.first, n.final
		c.Binned.Hold, c.FirstBinned.Hold = n.binned, n.firstBinned
		c.RetestAccepts.Hold = n.retestAccepts
	case inRework:
		c.Final.Rework = n.final
	}
}

func (t *Tally) set(v pipeline.Verdict, n int64) {
	switch v {
	case pipeline.Accept:
		t.Accept = n
	case pipeline.Reject:
		t.Reject = n
	case pipeline.Hold:
		t.Hold = n
	}
}

// ReasonCounts says how often a reason was given. Showings over all reasons add up to
// more than were shown where one had several; Principal counts each showing once, under
// its first reason.
type ReasonCounts struct {
	Group
	Verdict        pipeline.Verdict // the line's, of the showings counted
	Reason         string
	Showings       int64
	Principal      int64
	First          int64 // Showings, first attempts only
	FirstPrincipal int64 // Principal, first attempts only
	Removable      int64 // of First: those without this reason by their permanent defects alone
}

// Reasons answers a question by reason.
func (s *Store) Reasons(ctx context.Context, q Question) ([]ReasonCounts, error) {
	var out []ReasonCounts
	var n ReasonCounts
	a := answer{table: `rollup_reasons`, keys: []string{`i.verdict`, `i.reason`},
		sums: []string{`showings`, `principal`, `first_showings`, `first_principal`, `removable`},
		into: []any{&n.Verdict, &n.Reason, &n.Showings, &n.Principal, &n.First, &n.FirstPrincipal, &n.Removable}}
	err := s.ask(ctx, q, a, func(g Group) {
		n.Group = g
		out = append(out, n)
	})
	return out, err
}
