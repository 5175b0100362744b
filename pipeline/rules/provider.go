package rules

import (
	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/types"
)

// provider tells CEL's checker and interpreter about Records, on top of its own types.
type provider struct {
	*types.Registry
	records map[string]*recordType
}

func newProvider() *provider {
	return &provider{Registry: types.NewEmptyRegistry(), records: map[string]*recordType{}}
}

func (p *provider) add(r *recordType) { p.records[r.name] = r }

// FindStructType implements types.Provider.
func (p *provider) FindStructType(name string) (*types.Type, bool) {
	if _, ok := p.records[name]; ok {
		return types.NewTypeTypeWithParam(cel.ObjectType(name)), true
	}
	return p.Registry.FindStructType(name)
}

// FindStructFieldNames implements types.Provider.
func (p *provider) FindStructFieldNames(name string) ([]string, bool) {
	if r, ok := p.records[name]; ok {
		return r.fields, true
	}
	return p.Registry.FindStructFieldNames(name)
}

// FindStructFieldType implements types.Provider.
func (p *provider) FindStructFieldType(name, field string) (*types.FieldType, bool) {
	if r, ok := p.records[name]; ok {
		t, ok := r.types[field]
		return t, ok
	}
	return p.Registry.FindStructFieldType(name, field)
}
