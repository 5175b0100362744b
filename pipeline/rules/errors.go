package rules

import (
	"fmt"
	"regexp"
	"strings"

	"cel.dev/cel-go/cel"
)

// SyntaxError is one mistake in an expression.
type SyntaxError struct {
	Line, Column int // within the expression, 1-based; columns count characters
	Message      string
}

// Error returns "line:column: message".
func (e SyntaxError) Error() string {
	return fmt.Sprintf("%d:%d: %s", e.Line, e.Column, e.Message)
}

// SyntaxErrors is what Compile returns for a faulty expression; it is never empty.
type SyntaxErrors []SyntaxError

// Error returns one mistake a line.
func (e SyntaxErrors) Error() string {
	lines := make([]string, len(e))
	for i, one := range e {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

func syntaxErrors(expr string, issues *cel.Issues, names []string) SyntaxErrors {
	var out SyntaxErrors
	for _, e := range issues.Errors() {
		one := SyntaxError{Line: max(e.Location.Line(), 1), Column: max(e.Location.Column()+1, 1)}
		one.Message = plainWords(e.Message)
		out = append(out, suggest(one, expr, names))
	}
	return out
}

// plainWords says what CEL says in the words of a person who writes limits.
func plainWords(message string) string {
	for _, r := range []struct{ form, word string }{
		{` \(in container '[^']*'\)`, ""},
		{`^Syntax error: `, ""},
		{` expecting \{.*\}`, ""},
		{` \(did you mean [^)]*\)`, ""}, // CEL also thinks of names that are switched off here
		{`mismatched input '<EOF>'`, "the expression ends too early"},
		{`'<EOF>'`, "the end of the expression"},
		{`'_([^_'a-z?]+)_'`, "'$1'"},
		{`'_\?_:_'`, "'? :'"},
		{`found no matching overload for`, "these operands do not go together:"},
		{`undeclared reference to`, "unknown name"},
		{`undefined field`, "unknown name"},
		{`\bdouble\b`, "number"}, {`\bstring\b`, "text"}, {`\bbool\b`, "condition"},
	} {
		message = regexp.MustCompile(r.form).ReplaceAllString(message, r.word)
	}
	return message
}

var unknownName = regexp.MustCompile(`unknown name '([a-zA-Z0-9_]+)'`)

// suggest adds the nearest known name to a message about an unknown one, or all of them.
// CEL places an unknown function at its parenthesis; that is put right.
func suggest(e SyntaxError, expr string, names []string) SyntaxError {
	m := unknownName.FindStringSubmatch(e.Message)
	if m == nil {
		return e
	}
	known, what := names, "names"
	if before := textBefore(expr, e.Line, e.Column); strings.HasSuffix(before, m[1]) {
		e.Column -= len(m[1])
		known, what = functionNames(), "functions"
	}
	if near := Nearest(m[1], known); near != "" {
		e.Message += fmt.Sprintf(" (did you mean '%s'?)", near)
	} else {
		e.Message += fmt.Sprintf(" (%s: %s)", what, strings.Join(known, ", "))
	}
	return e
}

// textBefore returns the part of a line that lies before a column.
func textBefore(expr string, line, column int) string {
	lines := strings.Split(expr, "\n")
	if line > len(lines) {
		return ""
	}
	runes := []rune(lines[line-1])
	return string(runes[:min(column-1, len(runes))])
}

// functionNames lists what may be called.
func functionNames() []string {
	return []string{"abs", "all", "contains", "count", "endsWith", "exists", "exists_one", "filter",
		"has", "largest", "map", "max", "min", "size", "sqrt", "startsWith", "sum"}
}
