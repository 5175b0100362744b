package pipeline

import (
	"fmt"
	"regexp"
)

// Purpose says why a unit was shown. Only production counts in yield.
type Purpose string

// The purposes.
const (
	Production Purpose = "production"
	Master     Purpose = "master"
	Study      Purpose = "study"
	Setup      Purpose = "setup"
	Recheck    Purpose = "recheck"
)

// Purposes lists the purposes in a fixed order.
func Purposes() []Purpose { return []Purpose{Production, Master, Study, Setup, Recheck} }

// Identity names one showing of one surface of one unit. It is the key of an
// inspection, together with a digest of the frames (see Digest).
type Identity struct {
	Part     string  `json:"part"`     // part number
	Revision string  `json:"revision"` // revision of the part's drawing
	Surface  string  `json:"surface"`  // which face
	Process  string  `json:"process"`  // the way the part was made
	Lot      string  `json:"lot"`
	Unit     string  `json:"unit"` // serial, or an id the server gave
	Line     string  `json:"line"`
	Station  string  `json:"station"`
	Attempt  int     `json:"attempt"` // n-th showing of this unit's surface, from 1
	Purpose  Purpose `json:"purpose"`
}

// MaxIDLength is the longest identifier in characters.
const MaxIDLength = 64

var idPattern = regexp.MustCompile(`^[A-Za-z0-9_-][A-Za-z0-9._-]*$`)

// CheckID refuses identifiers that cannot safely become a path or a table cell.
func CheckID(field, id string) error {
	if len(id) > MaxIDLength || !idPattern.MatchString(id) {
		return Invalid("%s: got %q, want 1 to %d characters of A-Z a-z 0-9 . _ - and no leading dot", field, id, MaxIDLength)
	}
	return nil
}

// Check refuses an identity with a missing or odd field. Revision, surface, process
// and lot may be empty; an empty unit is refused here, so a server that gives ids
// must have given one before.
func (id Identity) Check() error {
	required := []struct{ field, value string }{
		{"part", id.Part}, {"unit", id.Unit}, {"line", id.Line}, {"station", id.Station},
	}
	for _, f := range required {
		if err := CheckID(f.field, f.value); err != nil {
			return err
		}
	}
	optional := []struct{ field, value string }{
		{"revision", id.Revision}, {"surface", id.Surface}, {"process", id.Process}, {"lot", id.Lot},
	}
	for _, f := range optional {
		if f.value == "" {
			continue
		}
		if err := CheckID(f.field, f.value); err != nil {
			return err
		}
	}
	return id.checkAttempt()
}

func (id Identity) checkAttempt() error {
	most := 1000
	if id.Purpose == Master { // shown several times a day, for years
		most = 1_000_000
	}
	if id.Attempt < 1 || id.Attempt > most {
		return Invalid("attempt: got %d, want 1 to %d", id.Attempt, most)
	}
	for _, p := range Purposes() {
		if id.Purpose == p {
			return nil
		}
	}
	return Invalid("purpose: got %q, want one of %v", id.Purpose, Purposes())
}

// Key returns the identity as one string, for maps and logs.
func (id Identity) Key() string {
	return fmt.Sprintf("%s/%s/%s/%s/%s/%s/%d/%s", id.Part, id.Lot, id.Unit, id.Surface, id.Line, id.Station, id.Attempt, id.Purpose)
}
