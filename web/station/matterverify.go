package station

import (
	"errors"
	"net/http"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// verifyForm is the second person's word as it was typed.
type verifyForm struct {
	Action        string
	Version       string
	Fix           string
	Says          string // who signs, or who has to
	May           bool   // this person may sign
	Note          string
	NoteProblem   string
	SecretProblem string
	Refusing      bool
}

func newVerify(f ui.Format, person plant.Person, m plant.Matter, fix plant.Fix, here string, typed verifyForm) *verifyForm {
	v := typed
	v.Action, v.Version, v.Fix = here+"/verify", itoa(m.Version), fix.ID.String()
	switch {
	case person.ID == fix.Person:
		v.Says = f.Words.T("matter.verify-own", fix.PersonName)
	case !person.May(plant.VoidRecords):
		v.Says = f.Words.T("matter.verify-supervisor")
	default:
		v.May, v.Says = true, f.Words.T("matter.verify-meaning", person.Name)
	}
	return &v
}

// verifyFix is POST .../verify: a signature, so the secret is typed again.
func (s *Surface) verifyFix(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	form := verifyForm{Note: plant.CleanText(r.PostForm.Get("note")), Refusing: r.PostForm.Get("do") == "refuse"}
	fix, err := uuid.Parse(r.PostForm.Get("fix"))
	if err != nil {
		return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, typedMatter{})
	}
	here := path(st.ID, "matter", m.ID.String())
	if n := len(m.Fixes); n > 0 && m.Fixes[n-1].ID == fix && m.Fixes[n-1].Word != nil && m.Fixes[n-1].Word.Person == frame.Person.ID {
		ui.Redirect(w, r, here) // a double tap
		return nil
	}
	if err := s.signVerify(r, &form); err != nil {
		return err
	}
	if form.SecretProblem != "" {
		return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, typedMatter{verify: form})
	}
	err = s.store.VerifyFix(r.Context(), plant.VerifyRequest{Matter: m.ID, Version: number(r.PostForm.Get("version")), Fix: fix,
		Accepted: !form.Refusing, Note: form.Note, Person: frame.Person.ID})
	pe, ok := errors.AsType[*plant.Error](err)
	switch {
	case err == nil && form.Refusing:
		ui.Redirect(w, r, here)
		return nil
	case err == nil:
		back(w, r, st.ID, "closed")
		return nil
	case ok && pe.Kind == plant.Conflict:
		return s.quicker(w, r, typedMatter{verify: form})
	case ok && pe.Kind == plant.Invalid:
		form.NoteProblem = frame.Words.Problem(pe)
		return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, typedMatter{verify: form})
	}
	return err
}

// signVerify checks who verifies.
func (s *Surface) signVerify(r *http.Request, form *verifyForm) error {
	frame := ui.FrameOf(r)
	if !frame.Person.May(plant.VoidRecords) || s.signer == nil {
		return &plant.Error{Kind: plant.Forbidden, Message: frame.Words.T("matter.verify-forbidden")}
	}
	secret := auth.Secret(r.PostForm.Get("password"))
	if secret == "" {
		form.SecretProblem = frame.Words.T("matter.verify-no-secret")
		return nil
	}
	person, err := s.signer.Check(r.Context(), frame.Person.Login, secret, frame.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		form.SecretProblem = frame.Words.Problem(pe)
		return nil
	}
	if err != nil {
		return err
	}
	if person.ID != frame.Person.ID || !person.May(plant.VoidRecords) {
		return &plant.Error{Kind: plant.Forbidden, Message: frame.Words.T("matter.verify-forbidden")}
	}
	return nil
}
