package configs

import (
	"fmt"
	"reflect"

	"github.com/goccy/go-yaml/ast"
)

// Format is the number of the file format that this program reads and writes.
const Format = 1

// Load reads a file into a T whose zero value is the default.
func Load[T any](path string) (T, Source, error) {
	var zero T
	return LoadOver(path, zero)
}

// LoadOver reads a file over defaults: what it does not name keeps its value. The error
// is Problems where the content is to blame. defaults should hold no maps or slices that
// others use.
func LoadOver[T any](path string, defaults T) (T, Source, error) {
	text, err := readFile(path)
	if err != nil {
		return defaults, Source{File: path}, err
	}
	return Decode(path, text, defaults)
}

// Decode is LoadOver for text that was read already; file is its name in messages.
func Decode[T any](file string, text []byte, defaults T) (T, Source, error) {
	v, src, problems := decodeAll(file, text, defaults)
	if err := problems.err(); err != nil {
		return defaults, src, err
	}
	return v, src, nil
}

// decodeAll is Decode that returns what could be read beside the problems.
func decodeAll[T any](file string, text []byte, defaults T) (T, Source, Problems) {
	src, problems := parse(file, text)
	if problems == nil {
		problems = src.checkFormat()
	}
	if problems != nil {
		return defaults, src, problems
	}
	into := reflect.New(reflect.TypeFor[T]()).Elem()
	into.Set(reflect.ValueOf(defaults))
	r := &reader{file: file, skip: map[string]bool{"format": true}}
	r.lay(src.root, into, "")
	return into.Interface().(T), src, r.problems
}

// checkFormat refuses a file without `format: 1`; nothing else in a file of a newer
// format is looked at.
func (s Source) checkFormat() Problems {
	const path = "format"
	n, times := ast.Node(nil), 0
	pairs, _ := entries(s.root)
	for _, e := range pairs {
		if e.Key.GetToken().Value == path {
			n = e.Value
			times++
		}
	}
	wanted := fmt.Sprintf("%d", Format)
	if n == nil {
		return Problems{{File: s.File, Line: 1, Column: 1, Path: path, Found: "the key is missing", Want: "format: 1 at the top of the file"}}
	}
	var number int
	r := &reader{file: s.File}
	r.lay(n, reflect.ValueOf(&number).Elem(), path)
	switch {
	case len(r.problems) > 0:
		return r.problems
	case number > Format:
		r.wrong(n, path, fmt.Sprintf("got %d, which a newer version of this program wrote", number), wanted+"; update the program")
	case number < Format:
		r.wrong(n, path, fmt.Sprintf("got %d", number), wanted)
	case times > 1:
		r.wrong(n, path, "the key is given twice", "it once")
	}
	return r.problems
}
