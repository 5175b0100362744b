package configs

import (
	"bytes"
	"encoding/json"
	"fmt"
	"reflect"

	"github.com/goccy/go-yaml"
)

// Show returns settings as a file would write them: the keys in the order of the
// struct, every value given.
func Show(settings any) (string, error) {
	v := reflect.ValueOf(settings)
	text, err := yaml.Marshal(plain(v))
	if err != nil {
		return "", fmt.Errorf("settings of %s: %w", v.Type(), err)
	}
	return string(text), nil
}

// ShowJSON returns the same as a JSON object.
func ShowJSON(settings any) (json.RawMessage, error) {
	text, err := Show(settings)
	if err != nil {
		return nil, err
	}
	out, err := yaml.YAMLToJSON([]byte(text))
	return bytes.TrimSpace(out), err
}

// plain turns structs into ordered maps under the keys that files use.
func plain(v reflect.Value) any {
	switch v.Kind() {
	case reflect.Pointer, reflect.Interface:
		if v.IsNil() {
			return nil
		}
		return plain(v.Elem())
	case reflect.Struct:
		out := yaml.MapSlice{}
		for _, f := range fieldsOf(v.Type()) {
			out = append(out, yaml.MapItem{Key: f.key, Value: plain(v.FieldByIndex(f.index))})
		}
		return out
	case reflect.Slice, reflect.Array:
		out := make([]any, v.Len())
		for i := range out {
			out[i] = plain(v.Index(i))
		}
		return out
	}
	return v.Interface()
}
