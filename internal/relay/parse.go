package relay

import (
	"errors"
	"regexp"
	"strings"
)

// Pattern says what the lines of a gauge look like: prefix, running number, number,
// unit, suffix; all but the number may be missing.
//
//	14.991          14,991 mm          #0042;+14.991mm<
type Pattern struct {
	Prefix   string // stands before every reading and is taken off
	Suffix   string // behind it
	Unit     string // that readings are in; a line that states another is refused
	Sequence bool   // a running number and one of ; : space tab stand before the reading
}

// Line is one reading as a gauge told it.
type Line struct {
	Sequence string
	Number   string // as it stood there: the server reads it
}

// Why a line is no reading, as the server wants it told.
var (
	ErrUnit   = errors.New("unit")
	ErrNumber = errors.New("number")
	// ErrDecimals is of a reading that is finer than what is measured.
	ErrDecimals = errors.New("decimals")
	// errRefused is of what holds no reading by its nature, and cannot be.
	errRefused = errors.New("refused")
)

var (
	reading  = regexp.MustCompile(`^([+\-−]?(?:\d+(?:[.,]\d*)?|[.,]\d+))\s*([^\d\s.,+\-].*)?$`)
	sequence = regexp.MustCompile(`^(\d+)\s*[;:\s]\s*(\S.*)$`)
)

// Parse takes a line apart. It is one number or it is refused: there is no second guess.
func (p Pattern) Parse(text string) (Line, error) {
	s := strings.TrimSpace(text)
	s, ok := strings.CutPrefix(s, p.Prefix)
	if !ok {
		return Line{}, ErrNumber
	}
	if s, ok = strings.CutSuffix(s, p.Suffix); !ok {
		return Line{}, ErrNumber
	}
	var l Line
	s = strings.TrimSpace(s)
	if p.Sequence {
		m := sequence.FindStringSubmatch(s)
		if m == nil {
			return Line{}, ErrNumber
		}
		l.Sequence, s = m[1], m[2]
	}
	m := reading.FindStringSubmatch(s)
	if m == nil {
		return Line{}, ErrNumber
	}
	if m[2] != "" && m[2] != p.Unit {
		return Line{}, ErrUnit
	}
	l.Number = m[1]
	return l, nil
}
