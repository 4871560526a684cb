package station

import (
	"net/http"
	"net/url"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// restForm asks where product is that is suspect and was not put aside. It is asked once,
// with the closing of the matter, and an honest "not known" is an answer.
type restForm struct {
	Asks    string // "" while nothing is to be asked
	Choices []causeView
	Chosen  string
	Note    string
	Problem string
}

func typedRest(p url.Values) restForm {
	return restForm{Chosen: p.Get("rest"), Note: plant.CleanText(p.Get("rest_note"))}
}

// asked is the form with its question and its answers.
func (v restForm) asked(f ui.Format, asks string) restForm {
	v.Asks = asks
	for _, a := range plant.RestAnswers {
		v.Choices = append(v.Choices, causeView{Value: string(a), Name: f.Words.T("reach.rest.answer." + string(a)), Chosen: v.Chosen == string(a)})
	}
	return v
}

// restOf reads the answer; nil where nothing is to be asked, unsaid where it is missing.
func (s *Surface) restOf(r *http.Request, st plant.StationState, m plant.Matter, form *restForm) (e *plant.ContainmentEntry, unsaid bool, err error) {
	if !m.Open() {
		return nil, false, nil
	}
	v, _, err := s.asideOf(r, st, m)
	if err != nil || v == nil || v.Asks == "" {
		return nil, false, err
	}
	frame := ui.FrameOf(r)
	step := plant.ContainmentStep(form.Chosen)
	if !step.OfRest() {
		form.Problem = frame.Words.T("reach.rest.say")
		return nil, true, nil
	}
	// One answer to one question: its number follows from the matter.
	return &plant.ContainmentEntry{ID: uuid.NewSHA1(m.ID, []byte("rest")), Containment: m.ID, Step: step, Quantity: v.missing, Note: form.Note, Person: frame.Person.ID}, false, nil
}

func (s *Surface) stateRest(r *http.Request, e *plant.ContainmentEntry) error {
	if e == nil {
		return nil
	}
	return s.store.StateProduct(r.Context(), *e)
}
