package pipeline

import (
	"errors"
	"fmt"
)

// ErrorKind says what sort of failure an error is, so that a border can answer with
// the right code. The list is append-only.
type ErrorKind int

// The kinds.
const (
	Internal    ErrorKind = iota // our own fault
	InvalidKind                  // the request or a file is wrong
	Conflict                     // the same identity with other frames
	Exhausted                    // no room now; try again later
	NotFoundKind
	Unready // something needed is missing or down
)

// Error is an error with a kind.
type Error struct {
	Kind ErrorKind
	Err  error
}

func (e *Error) Error() string { return e.Err.Error() }

// Unwrap returns the wrapped error.
func (e *Error) Unwrap() error { return e.Err }

// Invalid returns an error of kind InvalidKind.
func Invalid(format string, args ...any) error {
	return &Error{Kind: InvalidKind, Err: fmt.Errorf(format, args...)}
}

// NotFound returns an error of kind NotFoundKind.
func NotFound(format string, args ...any) error {
	return &Error{Kind: NotFoundKind, Err: fmt.Errorf(format, args...)}
}

// Fail returns an error of the given kind.
func Fail(kind ErrorKind, format string, args ...any) error {
	return &Error{Kind: kind, Err: fmt.Errorf(format, args...)}
}

// KindOf returns the kind of err; an error without one is Internal.
func KindOf(err error) ErrorKind {
	var e *Error
	if errors.As(err, &e) {
		return e.Kind
	}
	return Internal
}
