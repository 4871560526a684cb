package describe

import (
	"math"
	"slices"
	"strconv"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// shift reads the shift of a row. A plant without a calendar gets those of the file.
func (r *reader) shift() {
	if r.cell["shift"] == "" && r.cell["shift_starts"] == "" {
		return
	}
	if r.cell["shift"] == "" {
		r.problemIn("shift", plant.Invalidf("shift", "Name the shift that starts then."))
		return
	}
	t := r.meet(plant.AShift, "shift", func(name string) (uuid.UUID, bool, bool) {
		for _, s := range r.o.Plant.Shifts {
			if s.Name == name {
				return s.ID, false, true
			}
		}
		return uuid.Nil, false, false
	})
	if t == nil {
		return
	}
	starts, ok := r.timeOfDay("shift_starts")
	if !ok || !r.say(t, "shift_starts", r.cell["shift_starts"]) {
		return
	}
	name := r.cell["shift"]
	switch {
	case !t.fresh:
		i := slices.IndexFunc(r.o.Plant.Shifts, func(s plant.Shift) bool { return s.ID == t.id })
		if r.cell["shift_starts"] != "" && r.o.Plant.Shifts[i].Starts != starts {
			r.differs(t, "shift_starts")
		}
	case t.place > 0: // a row above has it
	case r.cell["shift_starts"] == "":
		r.problemIn("shift_starts", plant.Invalidf("shift_starts", "Say when the shift starts."))
		delete(r.seen, key{plant.AShift, name})
	case len(r.o.Plant.Shifts) > 0:
		t.place, t.found = 1, len(r.plan.Found)
		r.plan.Found = append(r.plan.Found, Found{Kind: plant.AShift, Name: name, Row: r.row.number})
		r.differs(t, "shift")
	default:
		for _, o := range r.plan.Add.Shifts {
			if o.Starts == starts {
				r.problemIn("shift_starts", plant.Invalidf("shift_starts", "%s is taken by the shift in row %d.", r.cell["shift_starts"], r.seen[key{plant.AShift, o.Name}].said["shift"].row))
				return
			}
		}
		t.said["shift"] = statement{name, r.row.number}
		r.plan.Add.Shifts = append(r.plan.Add.Shifts, plant.Shift{ID: t.id, Name: name, Starts: starts})
		t.place = len(r.plan.Add.Shifts)
	}
}

// calendar puts the shifts of the file in the order of the day and finds what they cannot
// be together.
func (r *reader) calendar() {
	shifts := r.plan.Add.Shifts
	slices.SortFunc(shifts, func(a, b plant.Shift) int { return int(a.Starts - b.Starts) })
	if err := plant.CheckShifts(shifts); err != nil {
		r.row.number = r.seen[key{plant.AShift, shifts[len(shifts)-1].Name}].said["shift"].row
		r.problemIn("shift", problemOf(err))
	}
}

// timeOfDay reads a time of the day; workbooks keep it as a part of a day.
func (r *reader) timeOfDay(column string) (time.Duration, bool) {
	text := r.cell[column]
	if text == "" {
		return 0, true
	}
	if r.xlsx {
		if day, err := strconv.ParseFloat(text, 64); err == nil && day >= 0 && day < 1 {
			minutes := day * 24 * 60
			if whole := math.Round(minutes); math.Abs(minutes-whole) < 1e-3 && whole < 24*60 {
				return time.Duration(whole) * time.Minute, true
			}
		}
	}
	for _, layout := range []string{"15:04", "15.04", "15:04:05"} {
		if t, err := time.Parse(layout, text); err == nil && t.Second() == 0 {
			return time.Duration(t.Hour())*time.Hour + time.Duration(t.Minute())*time.Minute, true
		}
	}
	r.problemIn(column, plant.Invalidf(column, "%s is not a time of the day. Write it as 06:00.", text))
	return 0, false
}
