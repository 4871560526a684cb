package plant

import (
	"errors"
	"fmt"
)

// Kind says what sort of answer an Error is; the web turns it into a status.
type Kind uint8

const (
	Invalid   Kind = iota + 1 // what was sent cannot be right; the person can mend it
	NotFound                  // there is no such thing
	Conflict                  // it was right once, but the record has moved on, or it is there with other content
	Forbidden                 // this person may not do that
)

// ErrNoRoom is the fault of a write for which the database's disk had no room. Nothing of it
// was kept, and the same goes through once there is room.
var ErrNoRoom = errors.New("the database has no room to write")

// Error is a problem that somebody can act on. Message is the one sentence they
// read; it never holds raw error text. Everything that is not an *Error is a
// fault of ours: it is logged and shown only as a reference number.
//
// The sentence is written in English where the problem is found. Other languages
// find their own by the format, so it must be a literal in the sources: made by
// Invalidf and its sisters, or given as Message without arguments. A test of the
// catalogue reads the sources and names the sentences that a language lacks.
type Error struct {
	Kind    Kind
	Field   string // name of the form field or JSON key it is about, "" when about the whole
	Message string // in English, with its arguments put in
	Format  string // what Message was made from, "" when that is Message itself
	Args    []any
	Err     error // cause for the log, may be nil
}

func (e *Error) Error() string {
	if e.Err != nil {
		return e.Message + ": " + e.Err.Error()
	}
	return e.Message
}

func (e *Error) Unwrap() error { return e.Err }

// Sentence is the format of the message and its arguments, to be said in another
// language.
func (e *Error) Sentence() (format string, args []any) {
	if e.Format == "" {
		return e.Message, nil
	}
	return e.Format, e.Args
}

// Because adds the cause for the log to an error that was just made.
func (e *Error) Because(cause error) *Error {
	e.Err = cause
	return e
}

// Invalidf makes an Invalid error about one field.
func Invalidf(field, format string, args ...any) *Error {
	return errorf(Invalid, field, format, args...)
}

// NotFoundf makes a NotFound error about one field, or about the whole.
func NotFoundf(field, format string, args ...any) *Error {
	return errorf(NotFound, field, format, args...)
}

// Conflictf makes a Conflict error about one field, or about the whole.
func Conflictf(field, format string, args ...any) *Error {
	return errorf(Conflict, field, format, args...)
}

// Forbiddenf makes a Forbidden error about one field, or about the whole.
func Forbiddenf(field, format string, args ...any) *Error {
	return errorf(Forbidden, field, format, args...)
}

func errorf(k Kind, field, format string, args ...any) *Error {
	return &Error{Kind: k, Field: field, Message: fmt.Sprintf(format, args...), Format: format, Args: args}
}

// IsKind reports whether err is, or wraps, an Error of this kind.
func IsKind(err error, k Kind) bool {
	e, ok := errors.AsType[*Error](err)
	return ok && e.Kind == k
}
