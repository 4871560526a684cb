package station

import (
	"net/http"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// notTakenView is what came and could not be taken, until a person has seen it.
type notTakenView struct {
	Heading string // how many there are
	Action  string
	Until   string // clears what came until then: nothing that nobody saw
	Items   []leftOutView
	More    bool
}

type leftOutView struct {
	When string
	From string
	Says string
}

func newNotTaken(f ui.Format, st plant.StationState) notTakenView {
	v := notTakenView{Action: path(st.ID, "not-taken"), More: st.Aside.More, Heading: f.Words.T("outside.count", len(st.Aside.Newest))}
	if v.More {
		v.Heading = f.Words.T("outside.count-more", len(st.Aside.Newest))
	}
	for i, a := range st.Aside.Newest {
		if i == 0 {
			v.Until = a.CameAt.UTC().Format(time.RFC3339Nano)
		}
		from := a.DeviceName
		if from == "" {
			from = f.Words.T("outside.from-page")
		}
		v.Items = append(v.Items, leftOutView{When: f.Since(a.CameAt), From: from, Says: f.Words.Problem(a.Why)})
	}
	return v
}

func (s *Surface) clearNotTaken(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, 1)
	if err != nil {
		return err
	}
	until, err := time.Parse(time.RFC3339Nano, r.PostForm.Get("until"))
	if err != nil {
		return plant.Invalidf("until", "Look at the page again and say what was seen.")
	}
	if err := s.store.ClearAsides(r.Context(), st.ID, until, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	ui.Redirect(w, r, path(st.ID))
	return nil
}
