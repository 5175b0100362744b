package rules

import (
	"fmt"
	"regexp"

	"cel.dev/cel-go/cel"
)

// Type is what a variable holds or an expression gives.
type Type int

// The types of variables and results. Records cannot be a result.
const (
	Number  Type = iota + 1 // float64, always finite
	Text                    // string
	Truth                   // bool
	Records                 // a list of records, made by Record.List
)

// String returns the name used in messages.
func (t Type) String() string {
	switch t {
	case Number:
		return "a number"
	case Text:
		return "a text"
	case Truth:
		return "a condition (true or false)"
	case Records:
		return "a list"
	}
	return fmt.Sprintf("type %d", int(t))
}

// Var declares a name that an expression may use.
type Var struct {
	Name   string
	Type   Type
	record *recordType // the elements, where Type is Records
}

var nameForm = regexp.MustCompile(`^[a-z][a-z0-9_]*$`)

func (v Var) celType() (*cel.Type, error) {
	if !nameForm.MatchString(v.Name) {
		return nil, fmt.Errorf("variable %q: want lower_snake_case", v.Name)
	}
	switch v.Type {
	case Number:
		return cel.DoubleType, nil
	case Text:
		return cel.StringType, nil
	case Truth:
		return cel.BoolType, nil
	case Records:
		if v.record == nil {
			return nil, fmt.Errorf("variable %q: declare a list with Record.Var", v.Name)
		}
		return cel.ListType(cel.ObjectType(v.record.name)), nil
	}
	return nil, fmt.Errorf("variable %q: unknown type %d", v.Name, int(v.Type))
}
