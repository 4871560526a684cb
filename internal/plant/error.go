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

// Error is a problem that somebody can act on. Message is the one sentence they
// read; it never holds raw error text. Everything that is not an *Error is a
// fault of ours: it is logged and shown only as a reference number.
type Error struct {
	Kind    Kind
	Field   string // name of the form field or JSON key it is about, "" when about the whole
	Message string
	Err     error // cause for the log, may be nil
}

func (e *Error) Error() string {
	if e.Err != nil {
		return e.Message + ": " + e.Err.Error()
	}
	return e.Message
}

func (e *Error) Unwrap() error { return e.Err }

// Invalidf makes an Invalid error about one field.
func Invalidf(field, format string, args ...any) *Error {
	return &Error{Kind: Invalid, Field: field, Message: fmt.Sprintf(format, args...)}
}

// IsKind reports whether err is, or wraps, an Error of this kind.
func IsKind(err error, k Kind) bool {
	e, ok := errors.AsType[*Error](err)
	return ok && e.Kind == k
}
