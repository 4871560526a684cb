package admin

import (
	"fmt"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

const plantAddress = home + "/plant"

// plantView is the plant's name, its time and its shifts.
type plantView struct {
	Done   string
	Form   form
	Shifts shiftsView
}

// shiftsView is the shift calendar: a row for each shift and one more.
type shiftsView struct {
	Action, Problem string
	Rows            []shiftRow
}

type shiftRow struct {
	N                int
	ID, Name, Starts string
}

func (a *Admin) showPlant(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	q := newAsking(f.Words, url.Values{"plant": {f.Plant.Name}, "zone": {f.Plant.Location.String()}})
	return a.renderPlant(w, r, http.StatusOK, q, shiftRows(f.Plant.Shifts), "")
}

func (a *Admin) renderPlant(w http.ResponseWriter, r *http.Request, status int, q *asking, rows []shiftRow, problem string) error {
	groups := []group{{Fields: plantFields(q, ui.FrameOf(r).Now, true)}}
	for len(rows) < plant.MaxShifts {
		rows = append(rows, shiftRow{N: len(rows) + 1})
	}
	v := plantView{Done: doneWords(r),
		Form:   form{Action: plantAddress, Button: q.w.T("setup.save"), Groups: groups, Problem: q.rest(groups), Testid: "plant"},
		Shifts: shiftsView{Action: plantAddress + "/shifts", Problem: problem, Rows: rows}}
	s := shellFor(r, q.w.T("setup.plant"))
	s.Scripts = append(s.Scripts, zoneScript)
	return ui.Render(w, r, status, plantPage(s, v))
}

func plantFields(q *asking, now time.Time, chosen bool) []field {
	return []field{q.field(text, "plant"), zoneField(q, now, chosen)}
}

// plantOf reads name and time zone.
func plantOf(q *asking) plant.Plant {
	p := plant.Plant{Name: q.nameOf("plant")}
	loc, err := zoneOf(q.get("zone"))
	if err != nil {
		problem := q.w.T("setup.problem.zone")
		if like := likeZone(q.get("zone")); len(like) > 0 {
			problem = q.w.T("setup.problem.zone-like", strings.Join(like, ", "))
		}
		q.refuse("zone", problem)
		return p
	}
	p.Location = loc
	return p
}

func (a *Admin) changePlant(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	q := newAsking(f.Words, r.PostForm)
	p := plantOf(q)
	if !q.ok() {
		return a.renderPlant(w, r, http.StatusUnprocessableEntity, q, shiftRows(f.Plant.Shifts), "")
	}
	if err := a.storePlant(r, p); err != nil {
		return err
	}
	ui.Redirect(w, r, plantAddress+"?done=saved")
	return nil
}

func (a *Admin) storePlant(r *http.Request, p plant.Plant) error {
	if err := a.store.ChangePlant(r.Context(), p, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	return a.changed(r.Context())
}

func shiftRows(shifts []plant.Shift) []shiftRow {
	var rows []shiftRow
	for _, s := range shifts {
		rows = append(rows, shiftRow{len(rows) + 1, s.ID.String(), s.Name, clockText(s)})
	}
	return rows
}

func clockText(s plant.Shift) string {
	minutes := int(s.Starts / time.Minute)
	return fmt.Sprintf("%02d:%02d", minutes/60, minutes%60)
}

// changeShifts reads a row for each shift; a row without name and start is none.
func (a *Admin) changeShifts(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	var shifts []plant.Shift
	var rows []shiftRow
	for i := 1; i <= plant.MaxShifts; i++ {
		n := strconv.Itoa(i)
		row := shiftRow{i, r.PostForm.Get("id-" + n), plant.CleanText(r.PostForm.Get("name-" + n)), r.PostForm.Get("starts-" + n)}
		rows = append(rows, row)
		if row.Name == "" && row.Starts == "" {
			continue
		}
		s := plant.Shift{ID: knownShift(f.Plant, row.ID), Name: row.Name, Starts: -1}
		if t, err := time.Parse("15:04", row.Starts); err == nil {
			s.Starts = time.Duration(t.Hour())*time.Hour + time.Duration(t.Minute())*time.Minute
		}
		shifts = append(shifts, s)
	}
	err := a.store.SetShifts(r.Context(), shifts, f.Person.ID)
	q := newAsking(f.Words, url.Values{"plant": {f.Plant.Name}, "zone": {f.Plant.Location.String()}})
	if q.refused(err) {
		problem := q.problems["shifts"]
		q.problems = map[string]string{}
		return a.renderPlant(w, r, http.StatusUnprocessableEntity, q, rows, problem)
	}
	if err != nil {
		return err
	}
	if err := a.changed(r.Context()); err != nil {
		return err
	}
	ui.Redirect(w, r, plantAddress+"?done=saved")
	return nil
}

// knownShift is the id of a shift that the calendar has; one that a form made up is none.
func knownShift(p plant.Plant, id string) uuid.UUID {
	for _, s := range p.Shifts {
		if s.ID.String() == id {
			return s.ID
		}
	}
	return uuid.Nil
}
