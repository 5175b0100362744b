package outside

import (
	"bytes"
	"encoding/json"
	"fmt"
	"reflect"

	"lapgate/pipeline"
)

// settingsType is a Go type made at run time for the settings that a schema describes,
// so that the reader of recipes treats them like those of any stage.
type settingsType struct {
	of   reflect.Type
	text string // the defaults as JSON
}

// schema is the part of JSON Schema that settings may use: objects with known keys,
// lists, and the four plain types.
type schema struct {
	Type       string          `json:"type"`
	Properties json.RawMessage `json:"properties"`
	Items      json.RawMessage `json:"items"`
}

func newSettingsType(schemaText, defaults string) (settingsType, error) {
	t, err := typeOf([]byte(schemaText), "", 0)
	if err != nil {
		return settingsType{}, err
	}
	if t.Kind() != reflect.Struct {
		return settingsType{}, fmt.Errorf("the schema is of a %s, want an object", t.Kind())
	}
	s := settingsType{t, defaults}
	if _, err := s.value(defaults); err != nil {
		return s, fmt.Errorf("the defaults do not fit the schema: %w", err)
	}
	return s, nil
}

// maxDepth bounds how deep settings may nest, and maxKeys how many keys an object has.
const (
	maxDepth = 8
	maxKeys  = 256
)

func typeOf(text []byte, path string, depth int) (reflect.Type, error) {
	var s schema
	if err := json.Unmarshal(text, &s); err != nil {
		return nil, fmt.Errorf("schema%s: %w", path, err)
	}
	if depth > maxDepth {
		return nil, fmt.Errorf("schema%s: nested more than %d deep", path, maxDepth)
	}
	switch s.Type {
	case "object":
		return structOf(s.Properties, path, depth)
	case "array":
		item, err := typeOf(s.Items, path+"[]", depth+1)
		if err != nil {
			return nil, err
		}
		return reflect.SliceOf(item), nil
	case "string":
		return reflect.TypeFor[string](), nil
	case "boolean":
		return reflect.TypeFor[bool](), nil
	case "integer":
		return reflect.TypeFor[int](), nil
	case "number":
		return reflect.TypeFor[float64](), nil
	}
	return nil, fmt.Errorf("schema%s: type %q, want object, array, string, boolean, integer or number", path, s.Type)
}

// structOf keeps the keys in the order of the schema.
func structOf(properties []byte, path string, depth int) (reflect.Type, error) {
	keys, values, err := ordered(properties)
	if err != nil {
		return nil, fmt.Errorf("schema%s: properties: %w", path, err)
	}
	if len(keys) > maxKeys {
		return nil, fmt.Errorf("schema%s: %d keys, want at most %d", path, len(keys), maxKeys)
	}
	var fields []reflect.StructField
	for i, key := range keys {
		if !keyForm.MatchString(key) {
			return nil, fmt.Errorf("schema%s: key %q, want a-z, 0-9 and _", path, key)
		}
		t, err := typeOf(values[i], path+"."+key, depth+1)
		if err != nil {
			return nil, err
		}
		fields = append(fields, reflect.StructField{Name: fmt.Sprintf("Setting%d", i), Type: t,
			Tag: reflect.StructTag(fmt.Sprintf(`json:"%s" yaml:"%s"`, key, key))})
	}
	return reflect.StructOf(fields), nil
}

// ordered returns the keys of a JSON object in the order written, and their values.
func ordered(object []byte) (keys []string, values []json.RawMessage, err error) {
	if len(object) == 0 {
		return nil, nil, nil
	}
	d := json.NewDecoder(bytes.NewReader(object))
	if _, err := d.Token(); err != nil {
		return nil, nil, err
	}
	seen := map[string]bool{}
	for d.More() {
		key, err := d.Token()
		if err != nil {
			return nil, nil, err
		}
		name, ok := key.(string)
		if !ok || seen[name] {
			return nil, nil, fmt.Errorf("%v: no key, or given twice", key)
		}
		seen[name] = true
		var value json.RawMessage
		if err := d.Decode(&value); err != nil {
			return nil, nil, err
		}
		keys, values = append(keys, name), append(values, value)
	}
	return keys, values, nil
}

// value returns settings with what JSON says laid over zero values.
func (s settingsType) value(text string) (any, error) {
	dst := reflect.New(s.of)
	if err := decodeText(text)(dst.Interface()); err != nil {
		return nil, err
	}
	return dst.Elem().Interface(), nil
}

// defaults returns a fresh copy of the defaults, which are known to decode.
func (s settingsType) defaults() any {
	v, err := s.value(s.text)
	if err != nil {
		return reflect.Zero(s.of).Interface()
	}
	return v
}

// decoded lays a recipe's settings over the defaults; a nil decode leaves them.
func (s settingsType) decoded(decode pipeline.Decode) (any, error) {
	dst := reflect.New(s.of)
	dst.Elem().Set(reflect.ValueOf(s.defaults()))
	if decode != nil {
		if err := decode(dst.Interface()); err != nil {
			return nil, err
		}
	}
	return dst.Elem().Interface(), nil
}
