package admin

import (
	"context"
	"errors"
	"net/http"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Staff is what the pages of people and devices need. Without it they are not there.
type Staff struct {
	Store StaffStore
	Hash  func(ctx context.Context, s auth.Secret) (string, error)
	// Changed is told of a person whose rights or secrets were changed here.
	Changed func(person uuid.UUID)
	// DeviceChanged is told of a device that was changed or revoked here.
	DeviceChanged func(device uuid.UUID)
	// Sessions knows where people are signed in.
	Sessions ui.Stays
	// AuthorityAt is the page of the server's own authority, "" where it has none.
	AuthorityAt string
	// Outside is the address at which other machines reach the server, "" when none does.
	Outside func() string
}

// StaffStore is what they need of the plant's record.
type StaffStore interface {
	People(ctx context.Context) ([]plant.Person, error)
	Person(ctx context.Context, id uuid.UUID) (plant.Person, error)
	AddPerson(ctx context.Context, p plant.Person, secretHash string, by uuid.UUID) error
	SetRoles(ctx context.Context, id uuid.UUID, roles plant.Roles, by uuid.UUID) error
	SetActive(ctx context.Context, id uuid.UUID, active bool, by uuid.UUID) error
	SetSecret(ctx context.Context, id uuid.UUID, secretHash string, by uuid.UUID) error
	SetBadge(ctx context.Context, id uuid.UUID, badge, pinHash string, by uuid.UUID) error
	RenamePerson(ctx context.Context, id uuid.UUID, name string, by uuid.UUID) error
	FormerNames(ctx context.Context, id uuid.UUID) ([]plant.FormerName, error)
	EraseName(ctx context.Context, id, by uuid.UUID) error

	Places(ctx context.Context) ([]plant.Line, []plant.Station, error)
	Devices(ctx context.Context) ([]plant.Device, error)
	Device(ctx context.Context, id uuid.UUID) (plant.Device, error)
	DeviceCodes(ctx context.Context) ([]plant.DeviceCode, error)
	MakeDeviceCode(ctx context.Context, d plant.Device, by uuid.UUID) (plant.DeviceCode, error)
	WithdrawDeviceCode(ctx context.Context, id uuid.UUID) error
	ChangeDevice(ctx context.Context, d plant.Device, by uuid.UUID) error
	RevokeDevice(ctx context.Context, id, by uuid.UUID) error
}

const (
	peopleAddress  = home + "/people"
	devicesAddress = home + "/devices"
)

func (a *Admin) staffRoutes(r chi.Router) {
	if a.staff == nil {
		return
	}
	post := func(pattern string, f func(w http.ResponseWriter, r *http.Request) error) {
		r.Post(pattern, ui.Handle(a.log, func(w http.ResponseWriter, r *http.Request) error {
			if err := ui.ParseForm(w, r); err != nil {
				return err
			}
			return f(w, r)
		}))
	}
	r.Get("/people", ui.Handle(a.log, a.people))
	post("/people", a.addPerson)
	r.Get("/people/{person}", ui.Handle(a.log, a.person))
	post("/people/{person}/roles", a.changeRoles)
	post("/people/{person}/active", a.changeActive)
	post("/people/{person}/secret", a.changeSecret)
	post("/people/{person}/badge", a.changeBadge)
	post("/people/{person}/erase", a.erase)
	post("/people/{person}/name", a.rename)
	post("/people/{person}/end", a.endSession)
	r.Get("/devices", ui.Handle(a.log, a.devices))
	post("/devices", a.makeCode)
	post("/devices/{device}", a.changeDevice)
	post("/devices/{device}/revoke", a.revokeDevice)
	post("/devices/code/{code}/withdraw", a.withdrawCode)
}

// peopleView is the page of all people.
type peopleView struct {
	People []personRow
	Add    addView
	Made   *madeView
}

type personRow struct {
	Address, Name, Login, Roles, Comes, State string
	Out                                       bool
}

// addView is the form for somebody new, as typed.
type addView struct {
	Name, Login, Badge                      string
	Roles                                   []roleView
	NameProblem, LoginProblem, BadgeProblem string
	RolesProblem, Problem                   string
}

type roleView struct {
	Role, Name, Does string
	Chosen           bool
}

// madeView is what is told once: a password, a PIN, or both.
type madeView struct {
	Name, Login, Secret, Badge, PIN string
}

// personView is the page of one person.
type personView struct {
	Address, Name, Login  string
	Roles                 []roleView
	Active, Erased, Self  bool
	HasSecret, HasPIN     bool
	Badge                 string
	BadgeProblem, Problem string
	PINProblem            string
	Made                  *madeView
	Done                  string
	NewName, NameProblem  string
	Former                []string
	Stays                 []ui.StayView
}

func rolesOf(r *http.Request, chosen plant.Roles) []roleView {
	w := ui.FrameOf(r).Words
	var out []roleView
	for _, role := range plant.AllRoles {
		out = append(out, roleView{string(role), w.T("staff.role-name." + string(role)), w.T("devices.role." + string(role)), chosen.Has(role)})
	}
	return out
}

func postedRoles(r *http.Request) plant.Roles {
	var rs plant.Roles
	for _, role := range r.PostForm["role"] {
		rs = append(rs, plant.Role(role))
	}
	return rs
}

func (a *Admin) people(w http.ResponseWriter, r *http.Request) error {
	return a.showPeople(w, r, http.StatusOK, addView{Roles: rolesOf(r, nil)}, nil)
}

func (a *Admin) showPeople(w http.ResponseWriter, r *http.Request, status int, add addView, made *madeView) error {
	all, err := a.staff.Store.People(r.Context())
	if err != nil {
		return err
	}
	s := staffShell(r, "staff.people")
	t := s.Words
	v := peopleView{Add: add, Made: made}
	for _, p := range all {
		row := personRow{Address: peopleAddress + "/" + p.ID.String(), Name: p.Name, Login: p.Login, Out: !p.Active}
		for i, role := range p.Roles {
			if i > 0 {
				row.Roles += ", "
			}
			row.Roles += t.T("staff.role-name." + string(role))
		}
		switch {
		case p.HasSecret && p.HasPIN:
			row.Comes = t.T("staff.comes-both")
		case p.HasPIN:
			row.Comes = t.T("staff.comes-badge")
		case p.HasSecret:
			row.Comes = t.T("staff.comes-password")
		default:
			row.Comes = t.T("staff.comes-not")
		}
		switch {
		case !p.ErasedAt.IsZero():
			row.State, row.Login = t.T("staff.state-erased"), ""
		case !p.Active:
			row.State = t.T("staff.state-out")
		}
		v.People = append(v.People, row)
	}
	return ui.Render(w, r, status, peoplePage(s, v))
}

func staffShell(r *http.Request, title string) ui.Shell {
	t := ui.FrameOf(r).Words
	name := t.T("staff.people")
	if title == "staff.devices" {
		name = t.T("staff.devices")
	}
	s := shellFor(r, name)
	s.Styles = append(s.Styles, "css/admin-staff.css")
	return s
}

func (a *Admin) addPerson(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	p := plant.Person{ID: uuid.Must(uuid.NewV7()), Name: plant.CleanText(r.PostForm.Get("name")),
		Login: plant.CleanLogin(plant.CleanText(r.PostForm.Get("login"))), Roles: postedRoles(r), Active: true}
	badge := plant.CleanBadge(r.PostForm.Get("badge"))
	v := addView{Name: p.Name, Login: p.Login, Badge: badge, Roles: rolesOf(r, p.Roles)}
	if p.Name == "" {
		v.NameProblem = f.Words.T("devices.first-no-name")
	}
	if p.Login == "" {
		v.LoginProblem = f.Words.T("devices.first-no-login")
	}
	if len(badge) > plant.MaxBadge {
		v.BadgeProblem = f.Words.T("devices.long-badge")
	}
	if _, err := plant.CleanRoles(p.Roles); err != nil {
		v.RolesProblem = ui.ProblemOf(f.Words, err, "roles")
	}
	if v.NameProblem+v.LoginProblem+v.BadgeProblem+v.RolesProblem != "" {
		return a.showPeople(w, r, http.StatusUnprocessableEntity, v, nil)
	}
	secret := auth.RandomSecret()
	hash, err := a.staff.Hash(r.Context(), secret)
	if err != nil {
		return err
	}
	err = a.staff.Store.AddPerson(r.Context(), p, hash, f.Person.ID)
	made := &madeView{Name: p.Name, Login: p.Login, Secret: string(secret)}
	if err == nil && badge != "" {
		pin := auth.RandomPIN(badge)
		if err = a.setBadge(r, p.ID, badge, pin); err == nil {
			made.Badge, made.PIN = badge, string(pin)
		}
	}
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		v.LoginProblem, v.BadgeProblem = ui.ProblemOf(f.Words, pe, "login"), ui.ProblemOf(f.Words, pe, "badge")
		if v.LoginProblem+v.BadgeProblem == "" {
			v.Problem = f.Words.Problem(pe)
		}
		if pe.Field == "badge" { // the person is there, the badge is not
			return a.showPeople(w, r, ui.StatusOf(pe.Kind), v, made)
		}
		return a.showPeople(w, r, ui.StatusOf(pe.Kind), v, nil)
	}
	if err != nil {
		return err
	}
	return a.showPeople(w, r, http.StatusOK, addView{Roles: rolesOf(r, nil)}, made)
}

func (a *Admin) setBadge(r *http.Request, person uuid.UUID, badge string, pin auth.Secret) error {
	hash := ""
	if badge != "" {
		var err error
		if hash, err = a.staff.Hash(r.Context(), pin); err != nil {
			return err
		}
	}
	if err := a.staff.Store.SetBadge(r.Context(), person, badge, hash, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	a.staff.Changed(person)
	return nil
}

// personIn reads the person that the address names.
func (a *Admin) personIn(r *http.Request) (plant.Person, error) {
	id, err := staffID(r, "person")
	if err != nil {
		return plant.Person{}, err
	}
	return a.staff.Store.Person(r.Context(), id)
}

func staffID(r *http.Request, name string) (uuid.UUID, error) {
	text := chi.URLParam(r, name)
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return uuid.Nil, ui.NotFound(r)
	}
	return id, nil
}

func (a *Admin) person(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	v := newPerson(r, p)
	if done := r.URL.Query().Get("done"); ui.FrameOf(r).Words.Has("staff.done." + done) {
		v.Done = ui.FrameOf(r).Words.T("staff.done." + done)
	}
	return a.showPerson(w, r, p.ID, http.StatusOK, v)
}

func newPerson(r *http.Request, p plant.Person) personView {
	return personView{Address: peopleAddress + "/" + p.ID.String(), Name: p.Name, NewName: p.Name, Login: p.Login, Roles: rolesOf(r, p.Roles),
		Active: p.Active, Erased: !p.ErasedAt.IsZero(), Self: p.ID == ui.FrameOf(r).Person.ID, HasSecret: p.HasSecret, HasPIN: p.HasPIN, Badge: p.Badge}
}

func (a *Admin) showPerson(w http.ResponseWriter, r *http.Request, id uuid.UUID, status int, v personView) error {
	s := staffShell(r, "staff.people")
	former, err := a.staff.Store.FormerNames(r.Context(), id)
	if err != nil {
		return err
	}
	for _, n := range former {
		v.Former = append(v.Former, s.Words.T("staff.former-name", n.Name, s.Format.Clock(n.Until)))
	}
	devices, err := a.staff.Store.Devices(r.Context())
	if err != nil {
		return err
	}
	if v.Stays, err = ui.StaysOf(r.Context(), a.staff.Sessions, s, id, devices); err != nil {
		return err
	}
	return ui.Render(w, r, status, personPage(s, v))
}

// personChanged answers a change of a person: on to their page, or back with what is wrong.
func (a *Admin) personChanged(w http.ResponseWriter, r *http.Request, p plant.Person, done string, err error) error {
	a.staff.Changed(p.ID)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind != plant.NotFound {
		v := newPerson(r, p)
		v.Problem = ui.FrameOf(r).Words.Problem(pe)
		return a.showPerson(w, r, p.ID, ui.StatusOf(pe.Kind), v)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, peopleAddress+"/"+p.ID.String()+"?done="+done)
	return nil
}

// rename mends a printed name.
func (a *Admin) rename(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	v := newPerson(r, p)
	if v.NewName = plant.CleanText(r.PostForm.Get("name")); v.NewName == "" {
		v.NameProblem = f.Words.T("devices.first-no-name")
		return a.showPerson(w, r, p.ID, http.StatusUnprocessableEntity, v)
	}
	err = a.staff.Store.RenamePerson(r.Context(), p.ID, v.NewName, f.Person.ID)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Field == "name" {
		v.NameProblem = f.Words.Problem(pe)
		return a.showPerson(w, r, p.ID, ui.StatusOf(pe.Kind), v)
	}
	return a.personChanged(w, r, p, "name", err)
}

// endSession ends one session of a person.
func (a *Admin) endSession(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	return a.personChanged(w, r, p, "end", a.staff.Sessions.End(r.Context(), p.ID, r.PostForm.Get("session")))
}

func (a *Admin) changeRoles(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	return a.personChanged(w, r, p, "roles", a.staff.Store.SetRoles(r.Context(), p.ID, postedRoles(r), ui.FrameOf(r).Person.ID))
}

func (a *Admin) changeActive(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	active, done := r.PostForm.Get("active") == "yes", "out"
	if active {
		done = "in"
	}
	return a.personChanged(w, r, p, done, a.staff.Store.SetActive(r.Context(), p.ID, active, ui.FrameOf(r).Person.ID))
}

func (a *Admin) erase(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	if r.PostForm.Get("sure") != "yes" {
		v := newPerson(r, p)
		v.Problem = ui.FrameOf(r).Words.T("staff.erase-tick")
		return a.showPerson(w, r, p.ID, http.StatusUnprocessableEntity, v)
	}
	return a.personChanged(w, r, p, "erased", a.staff.Store.EraseName(r.Context(), p.ID, ui.FrameOf(r).Person.ID))
}

func (a *Admin) changeSecret(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	secret := auth.RandomSecret()
	hash, err := a.staff.Hash(r.Context(), secret)
	if err != nil {
		return err
	}
	if err := a.staff.Store.SetSecret(r.Context(), p.ID, hash, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	a.staff.Changed(p.ID)
	p.HasSecret = true
	v := newPerson(r, p)
	v.Made = &madeView{Name: p.Name, Login: p.Login, Secret: string(secret)}
	return a.showPerson(w, r, p.ID, http.StatusOK, v)
}

// changeBadge gives a badge with a PIN that was typed here, or one that is made and told
// once. An empty badge takes both away.
func (a *Admin) changeBadge(w http.ResponseWriter, r *http.Request) error {
	p, err := a.personIn(r)
	if err != nil {
		return err
	}
	t := ui.FrameOf(r).Words
	badge := plant.CleanBadge(r.PostForm.Get("badge"))
	pin, made := auth.Secret(r.PostForm.Get("pin")), (*madeView)(nil)
	v := newPerson(r, p)
	v.Badge = badge
	switch {
	case badge == "":
	case pin == "":
		pin = auth.RandomPIN(badge)
		made = &madeView{Name: p.Name, Badge: badge, PIN: string(pin)}
	default:
		if err := auth.CheckPIN(pin, badge); err != nil {
			v.PINProblem = ui.ProblemOf(t, err, "pin")
		} else if r.PostForm.Get("again") != string(pin) {
			v.PINProblem = t.T("staff.not-the-same-pin")
		}
	}
	if v.PINProblem != "" {
		return a.showPerson(w, r, p.ID, http.StatusUnprocessableEntity, v)
	}
	err = a.setBadge(r, p.ID, badge, pin)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Field == "badge" {
		v.BadgeProblem = t.Problem(pe)
		return a.showPerson(w, r, p.ID, ui.StatusOf(pe.Kind), v)
	}
	if err != nil {
		return err
	}
	if made == nil {
		ui.Redirect(w, r, v.Address+"?done=badge")
		return nil
	}
	v.HasPIN, v.Made = true, made
	return a.showPerson(w, r, p.ID, http.StatusOK, v)
}
