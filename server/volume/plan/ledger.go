package plan

import (
	"errors"
	"fmt"
	"strings"
)

// ResolveLedger fills every yield that comes from the ledger by ask, which is
// given the filter. Holds are left out of the yield: they are neither.
func (p *Plan) ResolveLedger(ask func(LedgerFilter) (Counts, error)) error {
	var errs []error
	for i := range p.Processes {
		y := &p.Processes[i].Yield
		if y.Ledger == nil {
			continue
		}
		at := fmt.Sprintf("processes[%d].yield.ledger", i)
		counts, err := ask(*y.Ledger)
		switch {
		case err != nil:
			errs = append(errs, &Problem{at, fmt.Sprintf("%s: %v", y.Ledger, err)})
		case counts.Accepted < 0 || counts.Rejected < 0 || counts.Held < 0:
			errs = append(errs, &Problem{at, "the ledger answered a negative count"})
		case counts.Accepted+counts.Rejected == 0:
			errs = append(errs, &Problem{at, fmt.Sprintf("%s: no unit was accepted or rejected; widen the filter or inspect some", y.Ledger)})
		default:
			y.Counts = &counts
		}
	}
	return errors.Join(errs...)
}

// String lists the keys that are set, "ledger: all" if none is.
func (f LedgerFilter) String() string {
	var parts []string
	for _, kv := range [][2]string{{"part", f.Part}, {"process", f.Process}, {"lot", f.Lot}, {"line", f.Line},
		{"station", f.Station}, {"recipe", f.Recipe}, {"from", f.From}, {"to", f.To}} {
		if kv[1] != "" {
			parts = append(parts, kv[0]+"="+kv[1])
		}
	}
	if parts == nil {
		return "ledger: all"
	}
	return "ledger: " + strings.Join(parts, " ")
}

// Unresolved is an error while a yield still waits for the ledger or an
// inspection for its study.
func (p *Plan) Unresolved() error {
	var errs []error
	for i, process := range p.Processes {
		if process.Yield.Ledger != nil && process.Yield.Counts == nil {
			errs = append(errs, &Problem{fmt.Sprintf("processes[%d].yield.ledger", i),
				"no counts from the ledger; give a running server or a file of counts"})
		}
	}
	for i, option := range p.Inspections {
		if option.Study != nil && option.Study.Resolved == nil {
			errs = append(errs, &Problem{fmt.Sprintf("inspections[%d].study", i), "the study was not read"})
		}
	}
	return errors.Join(errs...)
}
