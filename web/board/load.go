package board

import (
	"net/http"
	"strconv"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

const alarmsAddress = "/board/alarms"

// loadHours is how many hours the alarm load shows, the present one included.
const loadHours = 24

// loadView is the alarm load: alarms by station and hour.
type loadView struct {
	Sum, Judged string
	Hours       []string // the hour of the day of each column
	HourTexts   []string // the same for a screen reader
	Days        []loadDay
	Lanes       []loadLane
	All         loadRow
}

// loadDay is a day over the columns that lie in it.
type loadDay struct {
	Name  string
	Hours int
}

// begins reports whether a day begins with a column, other than the first.
func (v loadView) begins(column int) bool {
	for _, d := range v.Days {
		if column == 0 {
			return false
		}
		if column -= d.Hours; column == 0 {
			return true
		}
	}
	return false
}

type loadLane struct {
	Name string
	Rows []loadRow
}

type loadRow struct {
	Name  string
	Cells []loadCell
	Day   string
}

// loadCell is one hour; empty when nothing alarmed.
type loadCell struct {
	Text, Class, Symbol string
}

// alarmsLately counts the alarms of the last hour.
func alarmsLately(states []plant.StationState, now time.Time) int {
	n := 0
	for i := range states {
		n += states[i].AlarmsSince(now.Add(-time.Hour))
	}
	return n
}

func (b *Board) alarms(w http.ResponseWriter, r *http.Request) error {
	states, err := b.store.StationStates(r.Context(), 0)
	if err != nil {
		return err
	}
	shell := ui.ShellFor(r, ui.Board, ui.FrameOf(r).Words.T("board.load.title"))
	shell.Styles = []string{"css/load.css"}
	shell.Bar = wayBack(shell.Words)
	return ui.Render(w, r, http.StatusOK, loadPage(shell, newLoad(shell.Format, states)))
}

func newLoad(f ui.Format, states []plant.StationState) loadView {
	w := f.Words
	local := f.Now.In(f.Zone)
	end := time.Date(local.Year(), local.Month(), local.Day(), local.Hour(), 0, 0, 0, f.Zone).Add(time.Hour)
	var v loadView
	for i := range loadHours {
		at := end.Add(time.Duration(i-loadHours) * time.Hour)
		v.Hours = append(v.Hours, strconv.Itoa(at.In(f.Zone).Hour()))
		if day := f.ShortDay(at); i == 0 || v.Days[len(v.Days)-1].Name != day {
			v.Days = append(v.Days, loadDay{Name: day})
		}
		v.Days[len(v.Days)-1].Hours++
		v.HourTexts = append(v.HourTexts, w.T("board.load.hour", f.Time(at)))
	}
	all := make([]int, loadHours)
	total, manageable, tooMuch := 0, 0, 0
	for _, l := range sortLanes(states) {
		lane := loadLane{Name: l.line.Name}
		for _, st := range l.stations {
			hours := st.AlarmHours(loadHours, end)
			row := loadRow{Name: st.Name}
			day := 0
			for i, n := range hours {
				cell := loadCell{Class: "none"}
				if n > 0 {
					cell = newLoadCell(f, n)
				}
				switch plant.GradeOfLoad(n) {
				case plant.LoadManageable:
					manageable++
				case plant.LoadTooMuch:
					tooMuch++
				}
				row.Cells, day, all[i] = append(row.Cells, cell), day+n, all[i]+n
			}
			row.Day, total = f.Count(day), total+day
			lane.Rows = append(lane.Rows, row)
		}
		v.Lanes = append(v.Lanes, lane)
	}
	v.All = loadRow{Name: w.T("board.load.all"), Day: f.Count(total)}
	for _, n := range all {
		cell := loadCell{Class: "none"}
		if n > 0 {
			cell.Text = f.Count(n)
		}
		v.All.Cells = append(v.All.Cells, cell)
	}
	rate := 0.0
	if len(states) > 0 {
		rate = float64(total) / float64(len(states)*loadHours)
	}
	v.Sum = w.T("board.load.sum", total, w.T("board.load.stations", len(states)), f.Number(rate, 2))
	switch {
	case tooMuch > 0:
		v.Judged = w.T("board.load.too-much", tooMuch)
	case manageable > 0:
		v.Judged = w.T("board.load.manageable", manageable)
	default:
		v.Judged = w.T("board.load.within")
	}
	return v
}

// newLoadCell shades an hour by its number; beyond what is acceptable it takes colour and
// shape.
func newLoadCell(f ui.Format, n int) loadCell {
	c := loadCell{Text: f.Count(n)}
	switch plant.GradeOfLoad(n) {
	case plant.LoadTooMuch:
		c.Class, c.Symbol = "too-much", "look"
	case plant.LoadManageable:
		c.Class = "manageable"
	default:
		c.Class = "n" + strconv.Itoa((n+1)/2) // 1 to 3
	}
	return c
}
