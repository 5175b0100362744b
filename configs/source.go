package configs

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"os"
	"strings"
	"unicode/utf8"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/parser"
)

// MaxFileBytes is the largest file that is read.
const MaxFileBytes = 256 << 10

// Source is a file that was read: its text, and where everything stands in it.
type Source struct {
	File string
	Text []byte // as it was read
	Hash string // "sha256:" + hex of Text
	root ast.Node
}

// HashOf returns "sha256:" and the hex SHA-256 of text.
func HashOf(text []byte) string {
	sum := sha256.Sum256(text)
	return "sha256:" + hex.EncodeToString(sum[:])
}

// readFile reads a file of at most MaxFileBytes.
func readFile(path string) ([]byte, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, fmt.Errorf("cannot read: %w", err)
	}
	if info.Size() > MaxFileBytes {
		return nil, Problems{{File: path, Found: fmt.Sprintf("the file has %d bytes", info.Size()), Want: fmt.Sprintf("at most %d", MaxFileBytes)}}
	}
	return os.ReadFile(path)
}

// parse turns text into a Source, or says why it is not a YAML mapping.
func parse(file string, text []byte) (Source, Problems) {
	src := Source{File: file, Text: text, Hash: HashOf(text)}
	refuse := func(line, column int, found, want string) (Source, Problems) {
		return src, Problems{{File: file, Line: line, Column: column, Found: found, Want: want}}
	}
	switch {
	case len(text) > MaxFileBytes:
		return refuse(0, 0, fmt.Sprintf("the file has %d bytes", len(text)), fmt.Sprintf("at most %d", MaxFileBytes))
	case len(bytes.TrimSpace(text)) == 0:
		return refuse(0, 0, "the file is empty", "its content; perhaps it was saved only half")
	case !utf8.Valid(text) || bytes.IndexByte(text, 0) >= 0:
		return refuse(0, 0, "the file is not UTF-8 text", "YAML")
	}
	tree, err := parser.ParseBytes(bytes.TrimPrefix(text, []byte("\ufeff")), 0, parser.AllowDuplicateMapKey())
	if err != nil {
		return src, syntaxProblem(file, err)
	}
	var bodies []ast.Node
	for _, d := range tree.Docs {
		if d.Body != nil && d.Body.Type() != ast.DirectiveType && d.Body.Type() != ast.CommentType {
			bodies = append(bodies, d.Body)
		}
	}
	switch {
	case len(bodies) == 0:
		return refuse(0, 0, "the file holds only comments", "settings; perhaps it was saved only half")
	case len(bodies) > 1:
		line, column := place(bodies[1])
		return refuse(line, column, "a second document starts here", "one document in a file")
	}
	if _, ok := entries(bodies[0]); !ok {
		line, column := place(bodies[0])
		return refuse(line, column, "the file starts with "+describe(bodies[0]), "keys with values (key: value)")
	}
	src.root = bodies[0]
	return src, nil
}

func syntaxProblem(file string, err error) Problems {
	p := Problem{File: file, Found: err.Error()}
	var syntax *yaml.SyntaxError
	if errors.As(err, &syntax) && syntax.Token != nil {
		p.Line, p.Column = syntax.Token.Position.Line, syntax.Token.Position.Column
		p.Found = "not valid YAML: " + strings.TrimSpace(syntax.Message)
	}
	return Problems{p}
}

// entries returns the keys and values of a mapping.
func entries(n ast.Node) ([]*ast.MappingValueNode, bool) {
	switch n := n.(type) {
	case *ast.MappingNode:
		return n.Values, true
	case *ast.MappingValueNode:
		return []*ast.MappingValueNode{n}, true
	}
	return nil, false
}

// place returns line and column of the first character of a node.
func place(n ast.Node) (line, column int) {
	t := n.GetToken()
	switch m := n.(type) {
	case *ast.MappingNode:
		if len(m.Values) > 0 && !m.IsFlowStyle {
			return place(m.Values[0].Key)
		}
	case *ast.MappingValueNode:
		return place(m.Key)
	}
	return t.Position.Line, t.Position.Column
}
