package plan

import (
	"fmt"
	"strings"
)

// CountsFile is a file of verdict counts for plans worked out away from the
// server. An entry answers the filter whose keys are the same, gate aside.
type CountsFile struct {
	Format int          `yaml:"format"`
	Note   string       `yaml:"note"`
	Counts []CountsItem `yaml:"counts"`
}

// CountsItem is the answer to one filter.
type CountsItem struct {
	Part     string `yaml:"part"`
	Process  string `yaml:"process"`
	Lot      string `yaml:"lot"`
	Line     string `yaml:"line"`
	Station  string `yaml:"station"`
	Recipe   string `yaml:"recipe"`
	From     string `yaml:"from"`
	To       string `yaml:"to"`
	Started  int    `yaml:"started"` // zero: accepted, rejected and held together
	Accepted int    `yaml:"accepted"`
	Rejected int    `yaml:"rejected"`
	Held     int    `yaml:"held"`
}

func (c CountsItem) filter() LedgerFilter {
	return LedgerFilter{Part: c.Part, Process: c.Process, Lot: c.Lot, Line: c.Line, Station: c.Station,
		Recipe: c.Recipe, From: c.From, To: c.To}
}

// Find is the counts for a filter; an error lists the filters there are.
func (f *CountsFile) Find(wanted LedgerFilter) (Counts, error) {
	wanted.Gate = ""
	var have []string
	for _, c := range f.Counts {
		if c.filter() != wanted {
			have = append(have, c.filter().String())
			continue
		}
		if c.Started == 0 {
			c.Started = c.Accepted + c.Rejected + c.Held
		}
		return Counts{c.Started, c.Accepted, c.Rejected, c.Held}, nil
	}
	return Counts{}, fmt.Errorf("the file of counts does not answer this filter; it has %s", strings.Join(have, "; "))
}
