package admin

import (
	"net/http"
	"strconv"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/describe"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// may refuses who may not do a step.
func may(r *http.Request, action plant.Action) error {
	if f := ui.FrameOf(r); !f.Person.May(action) {
		return &plant.Error{Kind: plant.Forbidden, Message: f.Words.T("ui.problem-text.forbidden")}
	}
	return nil
}

// startPerson gives a role to whoever is signed in, or adds a person who holds it. The
// administrator may do both: it is the same right as on the page about people, and it is
// sealed in the same way.
func (a *Admin) startPerson(r *http.Request, q *asking, role plant.Role) error {
	f := ui.FrameOf(r)
	if err := may(r, plant.Manage); err != nil {
		return err
	}
	switch q.values.Get("who") {
	case "me":
		defer a.forget(f.Person.ID)
		return a.store.AddRoles(r.Context(), f.Person.ID, plant.Roles{role}, f.Person.ID)
	case "other":
	default:
		q.refuse("who", q.w.T("setup.problem.choose"))
		return nil
	}
	name, login := q.get("person_name"), plant.CleanLogin(q.get("login"))
	if name == "" || len([]rune(name)) > plant.MaxName {
		q.refuse("person_name", q.w.T("setup.problem.person-name"))
	}
	if login == "" || len([]rune(login)) > plant.MaxName || strings.ContainsAny(login, " \t") {
		q.refuse("login", q.w.T("setup.problem.login"))
	}
	secret := auth.Secret(q.values.Get("password"))
	q.refused(auth.Rules{}.Check(secret, login, name))
	if !q.ok() {
		return nil
	}
	hash, err := a.hasher.Hash(r.Context(), secret)
	if err != nil {
		return err
	}
	return a.store.AddPerson(r.Context(), plant.Person{ID: newID(), Login: login, Name: name, Roles: plant.Roles{role}, Active: true}, hash, f.Person.ID)
}

// startFloor adds a line, a station and a machine in one go. Those of the same name that
// are there already, from a run that was left, are gone on with.
func (a *Admin) startFloor(r *http.Request, o plant.Outline, q *asking) error {
	line, station, machine := q.nameOf("line_name"), q.nameOf("station_name"), q.nameOf("machine_name")
	rate := q.decimalOf("rate")
	m := plant.Machine{ID: newID(), Name: machine}
	if rate != nil {
		m.PartsPerHour = rate.Float()
	}
	q.refused(m.Check())
	if !q.ok() {
		return nil
	}
	return a.store.Add(r.Context(), ui.FrameOf(r).Person.ID, func(o plant.Outline) (plant.Addition, error) {
		var add plant.Addition
		var l plant.Line
		for _, v := range o.Lines {
			if v.Name == line && !v.Retired {
				l = v
			}
		}
		if l.ID == uuid.Nil {
			l = plant.Line{ID: newID(), Name: line, Position: len(o.Lines)}
			add.Lines = []plant.Line{l}
		}
		var s plant.Station
		for _, v := range o.Stations {
			if v.Name == station && v.LineID == l.ID && !v.Retired {
				s = v
			}
		}
		if s.ID == uuid.Nil {
			s = plant.Station{ID: newID(), LineID: l.ID, Name: station, Position: len(o.Stations)}
			add.Stations = []plant.Station{s}
		}
		m.StationID = s.ID
		add.Machines = []plant.Machine{m}
		return add, nil
	})
}

// startMeasure adds the first characteristic, on the first machine. Its chart follows from
// how many parts are measured each time.
func (a *Admin) startMeasure(r *http.Request, o plant.Outline, q *asking) error {
	if err := may(r, plant.SetLimits); err != nil {
		return err
	}
	at := firstOf(o)
	q.values.Set("machine", at.machine.ID.String())
	if n, err := strconv.Atoi(q.get("size")); err == nil {
		q.values.Set("chart", string(describe.DefaultChart(n)))
	}
	c := plant.Characteristic{ID: newID(), MachineID: at.machine.ID, StationID: at.station.ID, Name: q.nameOf("name")}
	s := setupOf(q, o)
	if s.Plan.EveryMinutes == 0 && q.ok() {
		q.refuse("minutes", q.w.T("setup.problem.needed"))
	}
	if at.machine.ID == uuid.Nil {
		q.refuse("", q.w.T("setup.problem.no-machine"))
	}
	if !q.ok() {
		return nil
	}
	return a.store.AddCharacteristic(r.Context(), c, s, ui.FrameOf(r).Person.ID)
}

// startLimits states known limits for the first characteristic.
func (a *Admin) startLimits(r *http.Request, o plant.Outline, q *asking) (int, error) {
	if err := may(r, plant.SetLimits); err != nil {
		return http.StatusForbidden, err
	}
	at := firstOf(o)
	if at.characteristic.ID == uuid.Nil {
		q.refuse("", q.w.T("setup.problem.no-characteristic"))
		return http.StatusUnprocessableEntity, nil
	}
	return a.stateKnown(r, q, at.characteristic)
}
