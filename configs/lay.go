package configs

import (
	"fmt"
	"reflect"
	"slices"
	"strings"

	"github.com/goccy/go-yaml/ast"

	"lapgate/pipeline/rules"
)

// settings is a mapping whose type is known only later, such as those of a stage.
type settings struct {
	node ast.Node
	path string
}

var settingsType = reflect.TypeFor[settings]()

// reader lays nodes over Go values and collects what is wrong with them.
type reader struct {
	file     string
	skip     map[string]bool // paths that are read elsewhere
	problems Problems
}

func (r *reader) wrong(n ast.Node, path, found, want string) {
	line, column := place(n)
	r.problems = append(r.problems, Problem{File: r.file, Line: line, Column: column, Path: path, Found: found, Want: want})
}

// lay sets v from n. What the file does not name keeps its value; a list is replaced.
func (r *reader) lay(n ast.Node, v reflect.Value, path string) {
	if r.refused(n, path) {
		return
	}
	if v.Type() == settingsType {
		if _, ok := entries(n); !ok {
			r.wrong(n, path, "got "+describe(n), "keys with values")
			return
		}
		v.Set(reflect.ValueOf(settings{n, path}))
		return
	}
	switch v.Kind() {
	case reflect.Pointer:
		if v.IsNil() {
			v.Set(reflect.New(v.Type().Elem()))
		}
		r.lay(n, v.Elem(), path)
	case reflect.Struct:
		r.layStruct(n, v, path)
	case reflect.Slice, reflect.Array:
		r.layList(n, v, path)
	case reflect.Map:
		r.layMap(n, v, path)
	default:
		r.layScalar(n, v, path)
	}
}

// refused reports what no setting may be: nothing at all, or YAML's cleverer parts.
func (r *reader) refused(n ast.Node, path string) bool {
	switch n.(type) {
	case *ast.NullNode:
		r.wrong(n, path, "no value is given", "a value, or delete the line to keep the default")
	case *ast.AnchorNode, *ast.AliasNode, *ast.TagNode:
		r.wrong(n, path, "got "+describe(n), "a plain value: anchors, aliases and tags are not read here")
	default:
		return false
	}
	return true
}

func (r *reader) layStruct(n ast.Node, v reflect.Value, path string) {
	pairs, ok := entries(n)
	if !ok {
		r.wrong(n, path, "got "+describe(n), "keys with values: "+keyList(fieldsOf(v.Type())))
		return
	}
	fields := fieldsOf(v.Type())
	seen := map[string]bool{}
	for _, e := range pairs {
		key := e.Key.GetToken().Value
		if r.skip[join(path, key)] {
			continue
		}
		i := slices.IndexFunc(fields, func(f field) bool { return f.key == key })
		switch {
		case i < 0:
			r.unknownKey(e.Key, path, key, fields)
		case seen[key]:
			r.wrong(e.Key, join(path, key), "the key is given twice", "it once")
		default:
			r.lay(e.Value, v.FieldByIndex(fields[i].index), join(path, key))
		}
		seen[key] = true
	}
}

func (r *reader) unknownKey(n ast.Node, path, key string, fields []field) {
	found := fmt.Sprintf("unknown key %q", key)
	var names []string
	for _, f := range fields {
		names = append(names, f.key)
	}
	if near := rules.Nearest(strings.ToLower(key), names); near != "" {
		found += fmt.Sprintf(" (did you mean %q?)", near)
	}
	r.wrong(n, path, found, keyList(fields))
}

func keyList(fields []field) string {
	if len(fields) == 0 {
		return "no key at all"
	}
	var names []string
	for _, f := range fields {
		names = append(names, f.key)
	}
	if len(names) == 1 {
		return names[0]
	}
	return "one of " + strings.Join(names, ", ")
}

func (r *reader) layList(n ast.Node, v reflect.Value, path string) {
	list, ok := n.(*ast.SequenceNode)
	if !ok {
		r.wrong(n, path, "got "+describe(n), "a list (one line with a dash for each)")
		return
	}
	if v.Kind() == reflect.Array {
		if len(list.Values) != v.Len() {
			r.wrong(n, path, fmt.Sprintf("got a list of %d", len(list.Values)), fmt.Sprintf("a list of %d", v.Len()))
			return
		}
	} else {
		v.Set(reflect.MakeSlice(v.Type(), len(list.Values), len(list.Values)))
	}
	for i, item := range list.Values {
		r.lay(item, v.Index(i), index(path, i))
	}
}

func (r *reader) layMap(n ast.Node, v reflect.Value, path string) {
	pairs, ok := entries(n)
	if !ok || v.Type().Key().Kind() != reflect.String {
		r.wrong(n, path, "got "+describe(n), "names with values")
		return
	}
	out := reflect.MakeMap(v.Type())
	for _, e := range pairs {
		key := reflect.ValueOf(e.Key.GetToken().Value).Convert(v.Type().Key())
		if out.MapIndex(key).IsValid() {
			r.wrong(e.Key, join(path, key.String()), "the key is given twice", "it once")
			continue
		}
		item := reflect.New(v.Type().Elem()).Elem()
		r.lay(e.Value, item, join(path, key.String()))
		out.SetMapIndex(key, item)
	}
	v.Set(out)
}
