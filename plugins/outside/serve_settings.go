package outside

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"reflect"
	"regexp"
	"strings"

	"github.com/invopop/jsonschema"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// describe says what a factory makes, in the contract's form.
func describe(f pipeline.Factory) (*stagepb.DescribeResponse, error) {
	if err := checkKeys(reflect.TypeOf(f.Defaults), "settings"); err != nil {
		return nil, err
	}
	defaults, err := settingsText(f.Defaults)
	if err != nil {
		return nil, err
	}
	reflector := jsonschema.Reflector{Anonymous: true, DoNotReference: true, ExpandedStruct: true}
	schema, err := json.Marshal(reflector.Reflect(f.Defaults))
	if err != nil {
		return nil, fmt.Errorf("schema of the settings: %w", err)
	}
	scope := stagepb.Scope_SCOPE_VIEW
	if f.Scope == pipeline.ScopeUnit {
		scope = stagepb.Scope_SCOPE_UNIT
	}
	return &stagepb.DescribeResponse{ContractVersion: ContractVersion, Type: f.Type, Version: f.Version, Summary: f.Summary, Scope: scope,
		Reads: f.Reads, Writes: f.Writes, Stateful: f.Stateful, DefaultSettingsJson: defaults, SettingsSchemaJson: string(schema)}, nil
}

var keyForm = regexp.MustCompile(`^[a-z][a-z0-9_]*$`)

// checkKeys wants a json tag in lower_snake_case on every setting: it is the key in a
// recipe and on the wire.
func checkKeys(t reflect.Type, path string) error {
	switch t.Kind() {
	case reflect.Slice, reflect.Array, reflect.Pointer:
		return checkKeys(t.Elem(), path)
	case reflect.Map:
		return fmt.Errorf("%s: a map; want a struct or a list", path)
	case reflect.Struct:
		for i := range t.NumField() {
			f := t.Field(i)
			key, _, _ := strings.Cut(f.Tag.Get("json"), ",")
			if f.IsExported() && !keyForm.MatchString(key) {
				return fmt.Errorf("%s.%s: json tag %q; want a key of a-z, 0-9 and _", path, f.Name, key)
			}
			if err := checkKeys(f.Type, path+"."+f.Name); err != nil {
				return err
			}
		}
	}
	return nil
}

func settingsText(settings any) (string, error) {
	b, err := json.Marshal(settings)
	if err != nil {
		return "", fmt.Errorf("settings cannot be written as JSON: %w", err)
	}
	return string(b), nil
}

// decodeText returns the Decode of settings that came as JSON.
func decodeText(text string) pipeline.Decode {
	return func(dst any) error {
		d := json.NewDecoder(bytes.NewReader([]byte(text)))
		d.DisallowUnknownFields()
		if err := d.Decode(dst); err != nil {
			return &pipeline.Error{Kind: pipeline.InvalidKind, Err: keyedError(err)}
		}
		return nil
	}
}

// keyedError puts the key before an error of the JSON decoder.
func keyedError(err error) error {
	var wrong *json.UnmarshalTypeError
	if errors.As(err, &wrong) && wrong.Field != "" {
		return fmt.Errorf("%s: got a %s, want %s", wrong.Field, wrong.Value, wrong.Type)
	}
	if name, ok := strings.CutPrefix(err.Error(), "json: unknown field "); ok {
		return fmt.Errorf("%s: there is no such setting", strings.Trim(name, `"`))
	}
	return err
}

// checkSettings lays JSON over a copy of the defaults and has the settings check
// themselves. It returns the effective settings, or what is wrong with them.
func checkSettings(f pipeline.Factory, text string) (string, []*stagepb.SettingProblem) {
	dst := reflect.New(reflect.TypeOf(f.Defaults))
	defaults, err := settingsText(f.Defaults)
	if err == nil {
		err = json.Unmarshal([]byte(defaults), dst.Interface())
	}
	if err == nil {
		err = decodeText(text)(dst.Interface())
	}
	if err != nil {
		return "", problemsOf(err)
	}
	settings := dst.Elem().Interface()
	if c, ok := settings.(pipeline.Checker); ok {
		if err := c.Check(); err != nil {
			return "", problemsOf(err)
		}
	}
	effective, err := settingsText(settings)
	return effective, problemsOf(err)
}

// keyed is how the error of a Checker starts: with the key it is about.
var keyed = regexp.MustCompile(`(?s)^([a-z][a-z0-9_]*(?:\[\d+\])*(?:\.[a-z][a-z0-9_]*(?:\[\d+\])*)*): (.*)$`)

// problemsOf splits an error, of which a joined one holds several.
func problemsOf(err error) []*stagepb.SettingProblem {
	if err == nil {
		return nil
	}
	var several interface{ Unwrap() []error }
	if errors.As(err, &several) {
		var out []*stagepb.SettingProblem
		for _, one := range several.Unwrap() {
			out = append(out, problemsOf(one)...)
		}
		return out
	}
	if m := keyed.FindStringSubmatch(err.Error()); m != nil {
		return []*stagepb.SettingProblem{{Key: m[1], Message: m[2]}}
	}
	return []*stagepb.SettingProblem{{Message: err.Error()}}
}
