package plant

import (
	"strings"
	"time"

	"github.com/google/uuid"
	"golang.org/x/text/unicode/norm"
)

// Plant is the works as a whole.
type Plant struct {
	ID       uuid.UUID
	Name     string
	Location *time.Location // shifts, pages and prints are in its wall time
	Demo     bool           // made by the demonstration; said on every page
	Shifts   []Shift        // in the order of their starts

	ConfirmedAt time.Time // when somebody said that name and time zone are right, zero while nobody did
}

// Shift begins every day at a local wall time and lasts until the next begins, so a
// repeated or missing hour makes one shift longer or shorter.
type Shift struct {
	ID     uuid.UUID
	Name   string
	Starts time.Duration // after local midnight
}

// Line is a lane of the board.
type Line struct {
	ID       uuid.UUID
	Name     string
	Position int
	Retired  bool // kept for what was recorded, offered no more
}

// Station is a place with a tablet where samples are taken.
type Station struct {
	ID       uuid.UUID
	LineID   uuid.UUID
	Name     string
	Family   string // stations of one family share a catalogue of causes
	Position int
	Retired  bool
}

// Machine makes the parts. PartsPerHour is its rate, 0 when not known.
type Machine struct {
	ID           uuid.UUID
	StationID    uuid.UUID
	Name         string
	Position     int
	PartsPerHour float64
	Streams      []Stream
	Retired      bool
}

// Stream is one of several parallel sources on a machine.
type Stream struct {
	ID      uuid.UUID
	Name    string
	Retired bool
}

// Part is what a machine makes; parts of one family may share a chart.
type Part struct {
	ID      uuid.UUID
	Name    string
	Family  string
	Retired bool
}

// Gauge is what a characteristic is measured with.
type Gauge struct {
	ID         uuid.UUID
	Name       string
	Resolution *Decimal
	NextCheck  time.Time // a day, zero when none is set
	CheckDays  int       // from one good check to the next; 0: each check says when the next is
	Retired    bool
}

// Cause is one entry of the catalogue of a station family.
type Cause struct {
	ID     uuid.UUID
	Name   string
	Family string // of stations; "": all

	RetiredAt time.Time // since when it is no longer offered; zero: it is
}

// ShiftAt returns the shift that t falls into and when it began. Without a shift
// calendar the day is one shift.
func (p Plant) ShiftAt(t time.Time) (Shift, time.Time) {
	local := t.In(p.Location)
	day := func(back int, s Shift) time.Time {
		h, m := int(s.Starts/time.Hour), int(s.Starts%time.Hour/time.Minute)
		return time.Date(local.Year(), local.Month(), local.Day()-back, h, m, 0, 0, p.Location)
	}
	if len(p.Shifts) == 0 {
		return Shift{Name: "day"}, day(0, Shift{})
	}
	for back := 0; ; back++ {
		for i := len(p.Shifts) - 1; i >= 0; i-- {
			if began := day(back, p.Shifts[i]); !began.After(t) {
				return p.Shifts[i], began
			}
		}
	}
}

// CleanText brings text that a person typed into the form in which it is kept: no
// space around it, no control characters, normalisation form C.
func CleanText(s string) string {
	s = strings.Map(func(r rune) rune {
		switch {
		case r == '\n' || r == '\t':
			return ' '
		case r < ' ' || r == 0x7f || r == '\ufffd':
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, ""))
	return norm.NFC.String(strings.TrimSpace(s))
}

// CleanTextWithin cleans text and refuses it when it is longer than max characters.
func CleanTextWithin(field, s string, max int) (string, error) {
	s = CleanText(s)
	if n := len([]rune(s)); n > max {
		return "", Invalidf(field, "Please use at most %d characters here.", max)
	}
	return s, nil
}

// CutTime brings a time into the precision in which times are kept.
func CutTime(t time.Time) time.Time {
	if t.IsZero() {
		return t
	}
	return t.UTC().Truncate(time.Microsecond)
}
