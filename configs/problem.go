package configs

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
)

// Problem is one mistake in a file.
type Problem struct {
	File         string
	Line, Column int    // 1-based, columns count characters; 0 = the file as a whole
	Path         string // of the setting, such as views[0].stages[2].k_low; may be empty
	Found        string // what the file says
	Want         string // what it may say; empty where Found says it all
}

// Where returns file:line:column, or the file alone.
func (p Problem) Where() string {
	if p.Line == 0 {
		return p.File
	}
	return fmt.Sprintf("%s:%d:%d", p.File, p.Line, p.Column)
}

// Error returns "file:line:column: path: found, want".
func (p Problem) Error() string {
	out := p.Where() + ": "
	if p.Path != "" {
		out += p.Path + ": "
	}
	out += p.Found
	if p.Want != "" {
		out += ", want " + p.Want
	}
	return out
}

// Problems is the error of a faulty file; it is never empty.
type Problems []Problem

// Error returns one problem a line.
func (p Problems) Error() string {
	lines := make([]string, len(p))
	for i, one := range p {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

// sorted puts problems in the order in which a reader meets them.
func (p Problems) sorted() Problems {
	slices.SortStableFunc(p, func(a, b Problem) int {
		return cmp.Or(cmp.Compare(a.File, b.File), cmp.Compare(a.Line, b.Line), cmp.Compare(a.Column, b.Column))
	})
	return p
}

// err returns p as an error, nil where it is empty.
func (p Problems) err() error {
	if len(p) == 0 {
		return nil
	}
	return p.sorted()
}
