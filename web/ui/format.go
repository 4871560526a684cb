package ui

import (
	"strconv"
	"strings"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

const space = "\u00a0" // between a number and its unit: the line never breaks there

// Format writes times and numbers for people: in the plant's wall time, as of one
// instant, in one language.
type Format struct {
	Words *words.Printer
	Zone  *time.Location
	Now   time.Time
}

// NewFormat makes a Format; a nil zone is UTC.
func NewFormat(w *words.Printer, zone *time.Location, now time.Time) Format {
	if zone == nil {
		zone = time.UTC
	}
	return Format{Words: w, Zone: zone, Now: now}
}

// Time is the wall time alone, "12:42"; empty for the zero time.
func (f Format) Time(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return t.In(f.Zone).Format("15:04")
}

// Clock is the wall time with as much of the day as it takes to be unmistakable:
// "12:42" today, "Tue 12:42" within six days, "3 Mar 12:42" beyond, and with the
// year when it is another one.
func (f Format) Clock(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	local, now := t.In(f.Zone), f.Now.In(f.Zone)
	switch days := daysBetween(local, now); {
	case days == 0:
		return f.Time(t)
	case days >= -6 && days <= 6:
		return f.Words.T("ui.day-and-time", f.Words.T("ui.weekday."+strconv.Itoa(int(local.Weekday()))), f.Time(t))
	case local.Year() == now.Year():
		return f.Words.T("ui.day-and-time", f.ShortDay(t), f.Time(t))
	}
	return f.Words.T("ui.day-and-time", f.Date(t), f.Time(t))
}

// daysBetween counts the midnights from a to b, both in the same zone.
func daysBetween(a, b time.Time) int {
	midnight := func(t time.Time) time.Time { return time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, time.UTC) }
	return int(midnight(b).Sub(midnight(a)) / (24 * time.Hour))
}

// ShortDay is the day in short, "3 Mar".
func (f Format) ShortDay(t time.Time) string {
	local := t.In(f.Zone)
	return f.Words.T("ui.day-month", strconv.Itoa(local.Day()), f.Words.T("ui.month-short."+strconv.Itoa(int(local.Month()))))
}

// Day is the day in words without the year, "Thursday 12 March".
func (f Format) Day(t time.Time) string {
	local := t.In(f.Zone)
	return f.Words.T("ui.date", f.Words.T("ui.weekday-long."+strconv.Itoa(int(local.Weekday()))),
		strconv.Itoa(local.Day()), f.Words.T("ui.month."+strconv.Itoa(int(local.Month()))))
}

// Date is the day with its year, "12 March 2026".
func (f Format) Date(t time.Time) string {
	local := t.In(f.Zone)
	return f.Words.T("ui.date-year", strconv.Itoa(local.Day()),
		f.Words.T("ui.month."+strconv.Itoa(int(local.Month()))), strconv.Itoa(local.Year()))
}

// Machine is an instant for the datetime attribute of <time>.
func (f Format) Machine(t time.Time) string { return t.In(f.Zone).Format(time.RFC3339) }

// Age is how long something has lasted, rounded down: "12 min", "3 h", "2 d", and
// "now" within the first minute.
func (f Format) Age(d time.Duration) string {
	switch {
	case d < time.Minute:
		return f.Words.T("ui.age-now")
	case d < time.Hour:
		return f.Words.T("ui.age-minutes", int(d/time.Minute))
	case d < 24*time.Hour:
		return f.Words.T("ui.age-hours", int(d/time.Hour))
	}
	return f.Words.T("ui.age-days", int(d/(24*time.Hour)))
}

// Since is the age of what began at t, "" when that is not known.
func (f Format) Since(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return f.Age(f.Now.Sub(t))
}

// Late says how late a sample is, "late 9 min", "" when it is not.
func (f Format) Late(d plant.Due) string {
	by := d.LateBy(f.Now)
	if by < time.Minute {
		return ""
	}
	return f.Words.T("ui.late-by", f.Age(by))
}

// Count writes a whole number with the grouping of the language.
func (f Format) Count(n int) string { return f.Words.Count(n) }

// Number writes a computed figure with so many decimals and a true minus. What is no
// number is written as nothing.
func (f Format) Number(v float64, decimals int) string {
	return f.Words.Number(plant.FormatFloat(v, decimals))
}

// Units writes a reading, an integer in the last decimal.
func (f Format) Units(units int64, decimals int) string {
	return f.Words.Number(plant.FormatUnits(units, decimals))
}

// Decimal writes a specification limit, a target or a size.
func (f Format) Decimal(d plant.Decimal) string { return f.Words.Number(d.String()) }

// Signed writes a deviation: always with its sign, except that zero has none.
func (f Format) Signed(v float64, decimals int) string {
	return f.signed(plant.FormatFloat(v, decimals))
}

// SignedDecimal writes the size of an adjustment with its sign.
func (f Format) SignedDecimal(d plant.Decimal) string { return f.signed(d.String()) }

func (f Format) signed(s string) string {
	if s == "" || strings.HasPrefix(s, "-") || strings.Trim(s, "0.") == "" {
		return f.Words.Number(s)
	}
	return "+" + f.Words.Number(s)
}

// WithUnit puts a unit after a number that is already written, "14.993 mm", so that
// no line breaks between them. Nothing stays nothing.
func (f Format) WithUnit(number, unit string) string {
	if number == "" || unit == "" {
		return number
	}
	return number + space + unit
}

// Mean writes a mean with the decimals and the unit of its set-up.
func (f Format) Mean(v float64, s plant.Setup) string {
	return f.WithUnit(f.Number(v, s.MeanDecimals()), s.Unit)
}

// Limit writes a control limit or centre line with the decimals and the unit of its
// set-up.
func (f Format) Limit(v float64, s plant.Setup) string {
	return f.WithUnit(f.Number(v, s.LimitDecimals()), s.Unit)
}

// Reading writes a single reading with the unit of its set-up.
func (f Format) Reading(units int64, decimals int, s plant.Setup) string {
	return f.WithUnit(f.Units(units, decimals), s.Unit)
}

// Specification writes the specification in words: "14.982 to 15.000 mm", "at most
// 6.80 kN", "at least 4 N", "" when there is none.
func (f Format) Specification(s plant.Setup) string {
	switch {
	case s.Lower != nil && s.Upper != nil:
		return f.Words.T("ui.from-to", f.Decimal(*s.Lower), f.WithUnit(f.Decimal(*s.Upper), s.Unit))
	case s.Upper != nil:
		return f.Words.T("ui.at-most", f.WithUnit(f.Decimal(*s.Upper), s.Unit))
	case s.Lower != nil:
		return f.Words.T("ui.at-least", f.WithUnit(f.Decimal(*s.Lower), s.Unit))
	}
	return ""
}
