package station

import (
	"net/http"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// chooseView is the list of stations by line.
type chooseView struct {
	Lines []lineView
}

type lineView struct {
	Name     string
	Stations []taskView
}

// choose is GET /station: the station that this browser stood at last, or all of them
// to pick from.
func (s *Surface) choose(w http.ResponseWriter, r *http.Request) error {
	all, err := s.store.StationStates(r.Context(), 0)
	if err != nil {
		return err
	}
	if last, ok := ui.LastStation(r); ok && !r.URL.Query().Has("all") {
		for _, st := range all {
			if st.ID == last {
				ui.Redirect(w, r, path(last))
				return nil
			}
		}
	}
	f := ui.FrameOf(r).Format()
	var v chooseView
	for _, st := range all {
		if n := len(v.Lines); n == 0 || v.Lines[n-1].Name != st.Line.Name {
			v.Lines = append(v.Lines, lineView{Name: st.Line.Name})
		}
		line := &v.Lines[len(v.Lines)-1]
		line.Stations = append(line.Stations, stationCard(f, st))
	}
	shell := ui.ShellFor(r, ui.Station, f.Words.T("station.choose"))
	return ui.Render(w, r, http.StatusOK, choosePage(shell, v))
}

// stationCard is a station with the gravest of what it is in.
func stationCard(f ui.Format, st plant.StationState) taskView {
	t := taskView{Href: path(st.ID), Name: st.Name}
	worst := plant.CalmLeave
	for _, c := range st.Characteristics {
		if now := c.Condition(); now.Gravity() > worst.Gravity() {
			worst = now
		}
	}
	t.State, t.Symbol, t.Says = ui.Tone(worst), ui.SymbolOf(worst), ui.ConditionWord(f.Words, worst)
	t.Sub = f.Words.T("station.measures", len(st.Characteristics))
	return t
}
