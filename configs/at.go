package configs

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"

	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/token"
)

// At returns file:line:column of the value at a path such as "views[0].stages[2].k_low"
// ("$." before it is allowed). Where the file has no such value, it is the place of the
// nearest one that would hold it.
func (s Source) At(path string) string { return s.Problem(path, "", "").Where() }

// Problem returns a Problem placed at a path, as At does.
func (s Source) Problem(path, found, want string) Problem {
	path = strings.TrimPrefix(strings.TrimPrefix(path, "$"), ".")
	p := Problem{File: s.File, Path: path, Found: found, Want: want}
	if n := s.nearest(path); n != nil {
		p.Line, p.Column = place(n)
	}
	return p
}

// Within returns a Problem at a line and column (1-based) inside the text at a path, as
// for a mistake inside an expression.
func (s Source) Within(path string, line, column int, found, want string) Problem {
	p := s.Problem(path, found, want)
	if line < 1 {
		return p
	}
	switch n := s.nearest(p.Path).(type) {
	case *ast.LiteralNode:
		p.Column = indentation(s.Text, p.Line+1) + column
		p.Line += line
	case *ast.StringNode:
		if n.Token.Type == token.SingleQuoteType || n.Token.Type == token.DoubleQuoteType {
			p.Column++
		}
		if line == 1 {
			p.Column += column - 1
		}
	}
	return p
}

// indentation returns how many spaces a line starts with.
func indentation(text []byte, line int) int {
	lines := bytes.Split(text, []byte("\n"))
	if line > len(lines) {
		return 0
	}
	return len(lines[line-1]) - len(bytes.TrimLeft(lines[line-1], " "))
}

// nearest returns the node at a path, or the deepest one on the way to it.
func (s Source) nearest(path string) ast.Node {
	n := s.root
	for _, step := range steps(path) {
		next := child(n, step)
		if next == nil {
			return n
		}
		n = next
	}
	return n
}

// steps splits a path into keys and indices: "a[2].b" becomes a, 2, b.
func steps(path string) []string {
	return strings.FieldsFunc(path, func(r rune) bool { return r == '.' || r == '[' || r == ']' })
}

func child(n ast.Node, step string) ast.Node {
	if list, ok := n.(*ast.SequenceNode); ok {
		if i, err := strconv.Atoi(step); err == nil && i >= 0 && i < len(list.Values) {
			return list.Values[i]
		}
		return nil
	}
	pairs, _ := entries(n)
	for _, e := range pairs {
		if e.Key.GetToken().Value == step {
			return e.Value
		}
	}
	return nil
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

func index(path string, i int) string { return fmt.Sprintf("%s[%d]", path, i) }
