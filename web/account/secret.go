package account

import (
	"errors"
	"net/http"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// changePassword is POST /account/password.
func (s *Surface) changePassword(w http.ResponseWriter, r *http.Request) error {
	p, v, err := s.begin(w, r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	t, b := f.Words, &v.Password
	old, fresh := auth.Secret(r.PostForm.Get("old")), auth.Secret(r.PostForm.Get("new"))
	switch {
	case !p.HasSecret:
		b.Problem = t.T("account.no-password")
	case old == "":
		b.OldProblem = t.T("account.type-old-password")
	default:
		// What is wrong with the new one is said first: it costs no try.
		b.NewProblem = ui.ProblemOf(t, auth.Rules{}.Check(fresh, p.Login, p.Name), "password")
		if b.NewProblem == "" && r.PostForm.Get("again") != string(fresh) {
			b.AgainProblem = t.T("devices.not-the-same")
		}
	}
	if b.any() {
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	who, err := s.Checker.Check(r.Context(), p.Login, old, f.Addr)
	if status, refused := refusal(t.Problem, err, t.T("account.wrong-password"), &b.OldProblem); refused {
		return s.render(w, r, status, p, v)
	}
	if err != nil {
		return err
	}
	if who.ID != p.ID { // the name went to somebody else in between
		b.OldProblem = t.T("account.wrong-password")
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	if fresh == old {
		b.NewProblem = t.T("account.same-password")
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	hash, err := s.Hash(r.Context(), fresh)
	if err != nil {
		return err
	}
	if err := s.Store.SetSecret(r.Context(), p.ID, hash, p.ID); err != nil {
		return err
	}
	return s.done(w, r, p.ID, "password", v.Back)
}

// changePIN is POST /account/pin.
func (s *Surface) changePIN(w http.ResponseWriter, r *http.Request) error {
	p, v, err := s.begin(w, r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	t, b := f.Words, &v.PIN
	byPIN := auth.ByPIN(r.Context())
	old, fresh := auth.Secret(r.PostForm.Get("old")), auth.Secret(r.PostForm.Get("new"))
	switch {
	case p.Badge == "":
		b.Problem = t.T("account.no-badge")
	case old == "" && byPIN:
		b.OldProblem = t.T("account.type-old-pin")
	case old == "":
		b.OldProblem = t.T("account.type-old-password")
	default:
		b.NewProblem = ui.ProblemOf(t, auth.CheckPIN(fresh, p.Badge), "pin")
		if b.NewProblem == "" && r.PostForm.Get("again") != string(fresh) {
			b.AgainProblem = t.T("account.not-the-same-pin")
		}
	}
	if b.any() {
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	var who plant.Person
	wrong := t.T("account.wrong-password")
	if byPIN {
		wrong = t.T("account.wrong-pin")
		who, err = s.Checker.CheckPIN(r.Context(), p.Badge, old)
	} else {
		who, err = s.Checker.Check(r.Context(), p.Login, old, f.Addr)
	}
	if status, refused := refusal(t.Problem, err, wrong, &b.OldProblem); refused {
		return s.render(w, r, status, p, v)
	}
	if err != nil {
		return err
	}
	if who.ID != p.ID {
		b.OldProblem = wrong
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	if byPIN && fresh == old {
		b.NewProblem = t.T("account.same-pin")
		return s.render(w, r, http.StatusUnprocessableEntity, p, v)
	}
	hash, err := s.Hash(r.Context(), fresh)
	if err != nil {
		return err
	}
	if err := s.Store.SetPIN(r.Context(), p.ID, hash, p.ID); err != nil {
		return err
	}
	return s.done(w, r, p.ID, "pin", v.Back)
}

// begin reads the form and whom it is about: always whoever is signed in, whatever was sent.
func (s *Surface) begin(w http.ResponseWriter, r *http.Request) (plant.Person, view, error) {
	if err := ui.ParseForm(w, r); err != nil {
		return plant.Person{}, view{}, err
	}
	p, err := s.Store.Person(r.Context(), ui.FrameOf(r).Person.ID)
	return p, view{Back: ui.LocalPath(r.PostForm.Get("to"))}, err
}

// refusal places what the check of a secret said: that it was wrong, or how long to wait.
func refusal(say func(*plant.Error) string, err error, wrong string, place *string) (status int, refused bool) {
	pe, ok := errors.AsType[*plant.Error](err)
	switch {
	case !ok:
		return 0, false
	case pe.Kind == plant.Invalid:
		*place = wrong
		return http.StatusUnprocessableEntity, true
	}
	*place = say(pe)
	return http.StatusTooManyRequests, true
}
