package yield

import (
	"errors"
	"fmt"
)

// Tally sorts units by one word on each of them; every unit is in exactly one field.
type Tally struct{ Accepted, Rejected, Held int }

// Units is how many units the tally holds.
func (t Tally) Units() int { return t.Accepted + t.Rejected + t.Held }

// Plus adds two tallies of different units.
func (t Tally) Plus(other Tally) Tally {
	return Tally{t.Accepted + other.Accepted, t.Rejected + other.Rejected, t.Held + other.Held}
}

func (t Tally) check(name string) error {
	if t.Accepted < 0 || t.Rejected < 0 || t.Held < 0 {
		return fmt.Errorf("%s: %d accepted, %d rejected, %d held: want zero or more each", name, t.Accepted, t.Rejected, t.Held)
	}
	return nil
}

// Counts is one set of units sorted twice. Only units shown for production belong here; the caller selects them.
type Counts struct {
	First Tally // by the verdict of the first attempt, whatever was decided later
	Final Tally // by the last word: last attempt's verdict or a person's disposition; Held are the open holds, and units sent to clean or rework and not yet shown again
}

// Final is the final yield while holds may still be open.
type Final struct {
	Low      Rate     // every open hold turns out a reject
	High     Rate     // every open hold turns out an accept
	Open     int      // open holds
	Envelope Interval // from the low end of Low's to the high end of High's Clopper-Pearson interval: covers whatever the holds turn out to be
}

// Summary is the yield of one set of units at one confidence.
type Summary struct {
	Units      int
	Confidence float64
	FirstPass  Rate // accepted at the first attempt / units shown; a hold is not a pass, even one released later
	FirstHold  Rate // held at the first attempt / units shown
	Final      Final
}

// Summarize computes all yields of counts. Both tallies must hold the same number of units.
func Summarize(counts Counts, confidence float64) (Summary, error) {
	firstPass, errPass := FirstPass(counts.First, confidence)
	final, errFinal := FinalYield(counts.Final, confidence)
	if err := errors.Join(errPass, errFinal); err != nil {
		return Summary{}, err
	}
	units := counts.First.Units()
	if got := counts.Final.Units(); got != units {
		return Summary{}, fmt.Errorf("%d units by first verdict but %d by last word: want the same units sorted twice", units, got)
	}
	firstHold, err := NewRate(counts.First.Held, units, confidence)
	if err != nil {
		return Summary{}, err
	}
	return Summary{Units: units, Confidence: confidence, FirstPass: firstPass, FirstHold: firstHold, Final: final}, nil
}

// FirstPass is the share of units whose first attempt was accepted.
func FirstPass(first Tally, confidence float64) (Rate, error) {
	if err := first.check("first verdicts"); err != nil {
		return Rate{}, err
	}
	return NewRate(first.Accepted, first.Units(), confidence)
}

// FinalYield is the share of units whose last word is accept, with open holds as bounds.
func FinalYield(last Tally, confidence float64) (Final, error) {
	if err := last.check("last words"); err != nil {
		return Final{}, err
	}
	low, err := NewRate(last.Accepted, last.Units(), confidence)
	if err != nil {
		return Final{}, err
	}
	high, err := NewRate(last.Accepted+last.Held, last.Units(), confidence)
	if err != nil {
		return Final{}, err
	}
	envelope := Interval{Low: low.ClopperPearson.Low, High: high.ClopperPearson.High}
	return Final{Low: low, High: high, Open: last.Held, Envelope: envelope}, nil
}
