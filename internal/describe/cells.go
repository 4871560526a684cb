package describe

import (
	"strconv"
	"time"

	"holdfast/internal/plant"
)

// decimal reads an exact number; nil when the cell is empty.
func (r *reader) decimal(column string) (*plant.Decimal, bool) {
	text := r.cell[column]
	if text == "" {
		return nil, true
	}
	d, err := plant.ParseDecimal(text)
	if err != nil {
		r.problemIn(column, plant.Invalidf(column, "%s is not a number of at most %d decimals.", text, plant.MaxDecimals))
		return nil, false
	}
	return &d, true
}

// whole reads a whole number between two, 0 when the cell is empty.
func (r *reader) whole(column string, least, most int) (int, bool) {
	text := r.cell[column]
	if text == "" {
		return 0, true
	}
	n, err := strconv.Atoi(text)
	if err != nil || n < least || n > most {
		r.problemIn(column, plant.Invalidf(column, "%s is not a whole number from %d to %d.", text, least, most))
		return 0, false
	}
	return n, true
}

// workbookEpoch is the day 0 of the days that workbooks count, for dates after February
// of 1900.
var workbookEpoch = time.Date(1899, 12, 30, 0, 0, 0, 0, time.UTC)

func (r *reader) day(column string) (time.Time, bool) {
	text := r.cell[column]
	if text == "" {
		return time.Time{}, true
	}
	if r.xlsx {
		if n, err := strconv.Atoi(text); err == nil && n > 36_525 && n < 73_050 { // 2000 to 2100
			return workbookEpoch.AddDate(0, 0, n), true
		}
	}
	for _, layout := range []string{"2006-01-02", "2.1.2006"} {
		if t, err := time.Parse(layout, text); err == nil {
			return t, true
		}
	}
	r.problemIn(column, plant.Invalidf(column, "%s is not a day. Write it as 2027-01-31.", text))
	return time.Time{}, false
}
