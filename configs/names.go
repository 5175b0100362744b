package configs

import (
	"reflect"
	"strings"
	"unicode"
)

// field is a struct field that a file can set.
type field struct {
	key   string
	index []int
}

// fieldsOf lists the fields of a struct type in order. The key is that of a yaml or json
// tag, else the field's name in lower_snake_case. Embedded structs count as their fields.
func fieldsOf(t reflect.Type) []field {
	var out []field
	for _, f := range reflect.VisibleFields(t) {
		if f.Anonymous || !f.IsExported() {
			continue
		}
		if key := keyOf(f); key != "-" {
			out = append(out, field{key, f.Index})
		}
	}
	return out
}

func keyOf(f reflect.StructField) string {
	for _, tag := range []string{"yaml", "json"} {
		if name, _, _ := strings.Cut(f.Tag.Get(tag), ","); name != "" {
			return name
		}
	}
	return snakeCase(f.Name)
}

// snakeCase turns a Go name into a key: UMPerPx becomes um_per_px, AreaUM2 area_um2.
func snakeCase(name string) string {
	runes := []rune(name)
	var out []rune
	for i, r := range runes {
		if i > 0 && unicode.IsUpper(r) {
			afterLower := !unicode.IsUpper(runes[i-1])
			startsWord := i+1 < len(runes) && unicode.IsLower(runes[i+1])
			if afterLower || startsWord {
				out = append(out, '_')
			}
		}
		out = append(out, unicode.ToLower(r))
	}
	return string(out)
}
