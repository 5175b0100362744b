package configs

import (
	"fmt"
	"math"
	"reflect"
	"regexp"
	"strconv"
	"strings"

	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/token"
)

func (r *reader) layScalar(n ast.Node, v reflect.Value, path string) {
	switch v.Kind() {
	case reflect.String:
		r.layText(n, v, path)
	case reflect.Bool:
		if b, ok := n.(*ast.BoolNode); ok {
			v.SetBool(b.Value)
			return
		}
		r.wrong(n, path, "got "+describe(n), "true or false")
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64,
		reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		r.layInteger(n, v, path)
	case reflect.Float32, reflect.Float64:
		r.layNumber(n, v, path)
	default:
		panic(fmt.Sprintf("configs: a setting of Go type %s cannot be read from a file", v.Type()))
	}
}

func (r *reader) layText(n ast.Node, v reflect.Value, path string) {
	switch n := n.(type) {
	case *ast.StringNode:
		v.SetString(n.Value)
	case *ast.LiteralNode:
		v.SetString(n.Value.Value)
	case *ast.IntegerNode, *ast.FloatNode, *ast.BoolNode, *ast.NanNode, *ast.InfinityNode:
		r.wrong(n, path, "got "+describe(n), fmt.Sprintf("a text: put it in quotes, %q", n.GetToken().Value))
	default:
		r.wrong(n, path, "got "+describe(n), "a text")
	}
}

var wholeForm = regexp.MustCompile(`^[-+]?(0|[1-9][0-9_]*)$`)

func (r *reader) layInteger(n ast.Node, v reflect.Value, path string) {
	text, plain := plainScalar(n)
	if !plain || !wholeForm.MatchString(text) {
		r.wrong(n, path, "got "+describe(n), "a whole number")
		return
	}
	text = strings.ReplaceAll(text, "_", "")
	if v.CanUint() {
		u, err := strconv.ParseUint(strings.TrimPrefix(text, "+"), 10, v.Type().Bits())
		if err != nil {
			r.wrong(n, path, "got "+text, "a whole number from 0 to "+strconv.FormatUint(math.MaxUint64>>(64-v.Type().Bits()), 10))
			return
		}
		v.SetUint(u)
		return
	}
	i, err := strconv.ParseInt(text, 10, v.Type().Bits())
	if err != nil {
		r.wrong(n, path, "got "+text, fmt.Sprintf("a whole number of %d bits", v.Type().Bits()))
		return
	}
	v.SetInt(i)
}

var numberForm = regexp.MustCompile(`^[-+]?([0-9][0-9_]*\.?[0-9_]*|\.[0-9][0-9_]*)([eE][-+]?[0-9]+)?$`)

func (r *reader) layNumber(n ast.Node, v reflect.Value, path string) {
	text, plain := plainScalar(n)
	if !plain || !numberForm.MatchString(text) {
		r.wrong(n, path, "got "+describe(n), "a finite number")
		return
	}
	f, err := strconv.ParseFloat(strings.ReplaceAll(text, "_", ""), v.Type().Bits())
	if err != nil {
		r.wrong(n, path, "got "+text, "a finite number")
		return
	}
	v.SetFloat(f)
}

// plainScalar returns the text of a value written without quotes. The YAML library takes
// 1e3 for a text, so numbers are told by their own form.
func plainScalar(n ast.Node) (string, bool) {
	switch n := n.(type) {
	case *ast.IntegerNode, *ast.FloatNode:
		return n.GetToken().Value, true
	case *ast.StringNode:
		return n.Value, n.Token.Type != token.SingleQuoteType && n.Token.Type != token.DoubleQuoteType
	}
	return "", false
}

// describe names what stands at a node, for the sentence "got …".
func describe(n ast.Node) string {
	switch n := n.(type) {
	case *ast.MappingNode, *ast.MappingValueNode:
		return "keys with values"
	case *ast.SequenceNode:
		return "a list"
	case *ast.StringNode:
		if _, plain := plainScalar(n); plain {
			return shorten(n.Value)
		}
		return "the text " + strconv.Quote(shorten(n.Value))
	case *ast.LiteralNode:
		return "the text " + strconv.Quote(shorten(n.Value.Value))
	case *ast.NullNode:
		return "nothing"
	case *ast.AnchorNode:
		return "an anchor (&)"
	case *ast.AliasNode:
		return "an alias (*)"
	case *ast.TagNode:
		return "the tag " + n.GetToken().Value
	}
	return shorten(n.GetToken().Value)
}

func shorten(s string) string {
	const longest = 60
	if runes := []rune(s); len(runes) > longest {
		return string(runes[:longest]) + "…"
	}
	return s
}
