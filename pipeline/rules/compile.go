package rules

import (
	"fmt"
	"slices"
	"strings"

	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/types"
)

// Bounds on an expression: how long it may be, how deep it may nest, and what one run
// may cost. A loop over 2 000 defects fits many times; one inside another fits up to some
// 800, and beyond that the run ends with an error in less than a second.
const (
	MaxLength  = 2000
	maxNesting = 50
	costLimit  = 5_000_000
)

// Program is a compiled expression. It is safe for concurrent use.
type Program struct {
	text  string
	want  Type
	run   cel.Program
	types map[string]Type
}

// Compile checks and compiles an expression over vars whose result must be of type want:
// Number, Text or Truth. A faulty expression gives SyntaxErrors, faulty vars another error.
func Compile(expr string, vars []Var, want Type) (*Program, error) {
	if len(expr) > MaxLength {
		return nil, SyntaxErrors{{1, 1, fmt.Sprintf("the expression has %d bytes, want at most %d", len(expr), MaxLength)}}
	}
	if strings.TrimSpace(expr) == "" {
		return nil, SyntaxErrors{{1, 1, "the expression is empty, want " + want.String()}}
	}
	scope, err := newScope(vars)
	if err != nil {
		return nil, err
	}
	tree, err := scope.check(expr, want)
	if err != nil {
		return nil, err
	}
	run, err := scope.env.Program(tree, cel.CostLimit(costLimit))
	if err != nil {
		return nil, SyntaxErrors{{1, 1, err.Error()}}
	}
	return &Program{text: expr, want: want, run: run, types: scope.types}, nil
}

// Text returns the expression as it was written.
func (p *Program) Text() string { return p.text }

type scope struct {
	env   *cel.Env
	types map[string]Type
	names []string // for suggestions: variables, then fields of records
}

func newScope(vars []Var) (*scope, error) {
	s := &scope{types: map[string]Type{}}
	records := newProvider()
	var fields []string
	options := []cel.EnvOption{standard(), cel.CustomTypeProvider(records), cel.CustomTypeAdapter(records),
		cel.ParserExpressionSizeLimit(MaxLength), cel.ParserRecursionLimit(maxNesting)}
	for _, v := range vars {
		t, err := v.celType()
		if err != nil {
			return nil, err
		}
		if _, twice := s.types[v.Name]; twice {
			return nil, fmt.Errorf("variable %q is declared twice", v.Name)
		}
		if v.record != nil {
			records.add(v.record)
			fields = append(fields, v.record.fields...)
		}
		s.types[v.Name] = v.Type
		s.names = append(s.names, v.Name)
		options = append(options, cel.Variable(v.Name, t))
	}
	for _, f := range fields {
		if !slices.Contains(s.names, f) {
			s.names = append(s.names, f)
		}
	}
	options = append(append(options, arithmetic()...), measures()...)
	var err error
	s.env, err = cel.NewCustomEnv(options...)
	return s, err
}

func (s *scope) check(expr string, want Type) (*cel.Ast, error) {
	parsed, issues := s.env.Parse(expr)
	if issues.Err() != nil {
		return nil, syntaxErrors(expr, issues, s.names)
	}
	if err := promote(parsed.NativeRep()); err != nil {
		return nil, err
	}
	checked, issues := s.env.Check(parsed)
	if issues.Err() != nil {
		return nil, syntaxErrors(expr, issues, s.names)
	}
	if got := checked.OutputType(); !got.IsExactType(resultType(want)) {
		return nil, SyntaxErrors{{1, 1, fmt.Sprintf("the expression gives %s, want %s", plainType(got), want)}}
	}
	return checked, nil
}

func resultType(t Type) *cel.Type {
	switch t {
	case Number:
		return types.DoubleType
	case Text:
		return types.StringType
	}
	return types.BoolType
}

func plainType(t *cel.Type) string {
	switch t.Kind() {
	case types.DoubleKind:
		return Number.String()
	case types.StringKind:
		return Text.String()
	case types.BoolKind:
		return Truth.String()
	case types.ListKind:
		return Records.String()
	}
	return "a " + t.String()
}
