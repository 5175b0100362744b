package rules

import (
	"fmt"
	"math"
	"reflect"

	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/types"
	"cel.dev/cel-go/common/types/ref"
)

// Values gives the variables of an expression their values: a Map, Record.Of, or
// several of them in a row.
type Values interface {
	value(name string) (any, bool)
}

// Map holds values by name: float64, string, bool or List.
type Map map[string]any

func (m Map) value(name string) (any, bool) { v, ok := m[name]; return v, ok }

// Several looks a name up in each Values in turn.
type Several []Values

func (s Several) value(name string) (any, bool) {
	for _, values := range s {
		if v, ok := values.value(name); ok {
			return v, true
		}
	}
	return nil, false
}

type recordValues[T any] struct {
	record *Record[T]
	of     *T
}

func (r recordValues[T]) value(name string) (any, bool) {
	f, ok := r.record.byName[name]
	if !ok {
		return nil, false
	}
	return f.read(r.of), true
}

// activation hands Values to CEL and refuses what an expression must not see.
type activation struct {
	values Values
	types  map[string]Type
}

func (a activation) ResolveName(name string) (any, bool) {
	want, ok := a.types[name]
	if !ok {
		return nil, false
	}
	v, ok := a.values.value(name)
	if !ok {
		return types.NewErr("%s: no value was given", name), true
	}
	if l, isList := v.(List); isList {
		v = l.val
	}
	if !holds(v, want) {
		return types.NewErr("%s: got a %T, want %s", name, v, want), true
	}
	v, err := finite(name, v)
	if err != nil {
		return types.WrapErr(err), true
	}
	return v, true
}

func (a activation) Parent() cel.Activation { return nil }

func holds(v any, t Type) bool {
	switch v.(type) {
	case float64:
		return t == Number
	case string:
		return t == Text
	case bool:
		return t == Truth
	case ref.Val:
		return t == Records
	}
	return false
}

func finite(name string, v any) (any, error) {
	if f, ok := v.(float64); ok && (math.IsNaN(f) || math.IsInf(f, 0)) {
		return nil, fmt.Errorf("%s is %v, not a finite number", name, f)
	}
	return v, nil
}

// recordVal is one record inside a list.
type recordVal struct {
	celType *cel.Type
	target  any
}

func (v recordVal) ConvertToNative(t reflect.Type) (any, error) {
	return nil, fmt.Errorf("a %s cannot become a %s", v.celType, t)
}

func (v recordVal) ConvertToType(t ref.Type) ref.Val {
	return types.NewErr("a %s cannot become a %s", v.celType, t.TypeName())
}

func (v recordVal) Equal(other ref.Val) ref.Val {
	o, ok := other.(recordVal)
	return types.Bool(ok && o.target == v.target)
}

func (v recordVal) Type() ref.Type { return v.celType }
func (v recordVal) Value() any     { return v.target }
