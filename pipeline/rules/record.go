package rules

import (
	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/types"
	"cel.dev/cel-go/common/types/ref"
)

// Field reads one named member of a record of Go type T.
type Field[T any] struct {
	Name string
	Type Type
	read func(*T) any
}

// NumberField returns a Field that is a number.
func NumberField[T any](name string, read func(*T) float64) Field[T] {
	return Field[T]{name, Number, func(t *T) any { return read(t) }}
}

// TextField returns a Field that is a text.
func TextField[T any](name string, read func(*T) string) Field[T] {
	return Field[T]{name, Text, func(t *T) any { return read(t) }}
}

// TruthField returns a Field that is true or false.
func TruthField[T any](name string, read func(*T) bool) Field[T] {
	return Field[T]{name, Truth, func(t *T) any { return read(t) }}
}

// recordType is what the checker has to know of a Record, whatever its Go type.
type recordType struct {
	name   string
	fields []string
	types  map[string]*types.FieldType
}

// Record describes a Go type whose values expressions can read field by field.
// It is immutable and safe for concurrent use.
type Record[T any] struct {
	recordType
	byName map[string]Field[T]
	order  []Field[T]
}

// NewRecord returns a Record called name, as it appears in messages. A wrong or repeated
// field name is reported when the Record is first compiled with.
func NewRecord[T any](name string, fields ...Field[T]) *Record[T] {
	r := &Record[T]{byName: map[string]Field[T]{}, order: fields}
	r.recordType = recordType{name: name, types: map[string]*types.FieldType{}}
	for _, f := range fields {
		r.byName[f.Name] = f
		r.fields = append(r.fields, f.Name)
		t, err := Var{Name: f.Name, Type: f.Type}.celType()
		if err != nil {
			continue
		}
		r.types[f.Name] = &types.FieldType{
			Type:  t,
			IsSet: func(any) bool { return true },
			GetFrom: func(target any) (any, error) {
				return finite(f.Name, f.read(target.(*T)))
			},
		}
	}
	return r
}

// Vars declares every field as a variable of its own, for expressions about one record.
func (r *Record[T]) Vars() []Var {
	var out []Var
	for _, f := range r.order {
		out = append(out, Var{Name: f.Name, Type: f.Type})
	}
	return out
}

// Var declares a list of records called name.
func (r *Record[T]) Var(name string) Var {
	return Var{Name: name, Type: Records, record: &r.recordType}
}

// Of gives the fields of t as values of the variables that Vars declares.
func (r *Record[T]) Of(t *T) Values { return recordValues[T]{r, t} }

// List gives items as the value of a variable declared by Var. The items are not copied
// and must not change while an expression runs.
func (r *Record[T]) List(items []T) List {
	vals := make([]ref.Val, len(items))
	celType := cel.ObjectType(r.name)
	for i := range items {
		vals[i] = recordVal{celType, &items[i]}
	}
	return List{types.NewRefValList(types.DefaultTypeAdapter, vals)}
}

// List is a list of records, ready for use as a value.
type List struct{ val ref.Val }
