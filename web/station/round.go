package station

import (
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// roundWindow is how far apart the due times of one round may lie: what falls due
// within a few minutes is measured in one visit.
const roundWindow = 5 * time.Minute

// entryCookie keeps how readings are typed at this tablet.
const entryCookie = "entry"

const deviationEntry = "deviation"

// ShortReasons is the short list of why a subgroup is short, by the name under which
// it is recorded; the words stand in the catalogue.
var shortReasons = []string{"part lost", "machine stopped", "gauge not available", "other"}

func measurePath(station, characteristic uuid.UUID) string {
	return path(station) + "?" + url.Values{"measure": {characteristic.String()}}.Encode()
}

// plan is which round is to be taken: its characteristics and what it answers.
type plan struct {
	Due      time.Time
	Occasion plant.Occasion
	Of       []plant.CharacteristicState
}

// pick chooses the round: the one that want is part of when it is due, want alone
// outside of the plan when it is not, and the oldest due one when nothing is wanted.
// It is empty when nothing is due.
func pick(st plant.StationState, want uuid.UUID) plan {
	var base plant.CharacteristicState
	for _, c := range byDue(st.Characteristics) {
		if want == uuid.Nil && isDue(c) || c.ID == want {
			base = c
			break
		}
	}
	switch {
	case base.ID == uuid.Nil:
		return plan{}
	case !isDue(base):
		return plan{Of: []plant.CharacteristicState{base}}
	}
	p := plan{Due: base.Due.At, Occasion: base.Due.Occasion}
	for _, c := range st.Characteristics {
		if isDue(c) && c.Due.At.Sub(base.Due.At).Abs() <= roundWindow {
			p.Of = append(p.Of, c)
			if c.Due.At.Before(p.Due) {
				p.Due = c.Due.At
			}
		}
	}
	return p
}

// roundView is the form of one round.
type roundView struct {
	Action    string
	ID        string
	Due       string
	Occasion  string
	Unplanned bool
	Deviation bool
	Choice    bool // typing as deviation is possible
	Problem   string
	Draft     draftView
	Parts     []askView
}

// askView is one characteristic of the round.
type askView struct {
	ID        string
	Name      string
	What      string // "Axle seat diameter, mm"
	Setup     int
	Size      int
	Decimals  int
	Target    string // in whole last digits, for the script; "" when there is none
	Sign      bool   // a reading can be negative
	AskBelow  string // in whole last digits; "" when nothing is known
	AskAbove  string
	Ordinal   string // "1 of 2" in a round of several
	Readings  []readingView
	Problem   string
	Short     string // chosen reason
	ShortOpen bool
	ShortSays string // problem
	Streams   []streamView
	Falls     fallsView
}

// readingView is one numbered input.
type readingView struct {
	ID      string
	Label   string // "Part 4"
	Heading string // "Measure part 4 of 5"
	Raw     string
	Problem string
	First   []string // earlier typings
	Keyed   string   // id of who keyed it, "" when nothing is there
	Stream  string   // id of the stream that the part is to come from
	From    string   // its name, "" where there are none
}

// streamView is one stream of the machine, to choose.
type streamView struct{ ID, Name string }

// fallsView is where the round falls while it is typed.
type fallsView struct {
	Average    string
	Count      string
	Decimals   int
	Single     bool
	Sign       string // decimal sign
	None       string
	Inside     string
	Above      string
	Below      string
	DoneInside string
	DoneAbove  string
	DoneBelow  string
	Wide, Tall string // drawings of the averages
	PartsWide  string // drawings of the parts
	PartsTall  string
	Learning   string
}

// newRound is an empty form for a round.
func newRound(f ui.Format, st plant.StationState, p plan, deviation bool) roundView {
	return fillRound(f, st, draft{
		Round: uuid.Must(uuid.NewV7()), Due: p.Due, Occasion: p.Occasion, Deviation: deviation, Entries: emptyEntries(p.Of),
	})
}

// fillRound is the form with what was typed so far.
func fillRound(f ui.Format, st plant.StationState, d draft) roundView {
	v := roundView{Action: path(st.ID, "round"), ID: d.Round.String(), Occasion: string(d.Occasion),
		Unplanned: d.Due.IsZero(), Deviation: d.Deviation, Problem: d.Problem}
	if !d.Due.IsZero() {
		v.Due = d.Due.UTC().Format(time.RFC3339Nano)
	}
	for i, e := range d.Entries {
		a := newAsk(f, e)
		if len(d.Entries) > 1 {
			a.Ordinal = f.Words.T("station.one-of", i+1, len(d.Entries))
		}
		v.Choice = v.Choice || a.Target != ""
		v.Parts = append(v.Parts, a)
	}
	return v
}

func newAsk(f ui.Format, e draftEntry) askView {
	c, s := e.Of, e.Of.Setup
	a := askView{ID: c.ID.String(), Name: c.Title(), What: f.Words.T("station.name-unit", c.Title(), s.Unit),
		Setup: s.Version, Size: s.Size, Decimals: s.Decimals, Problem: e.Problem, Short: e.Short, ShortSays: e.ShortProblem,
		ShortOpen: e.Short != "" || e.ShortProblem != ""}
	if s.Target != nil {
		if units, err := s.Target.In(s.Decimals); err == nil {
			a.Target = strconv.FormatInt(units, 10)
		}
	}
	a.Sign = true
	if lo, hi, ok := askOutside(c); ok {
		a.AskBelow, a.AskAbove, a.Sign = strconv.FormatInt(lo, 10), strconv.FormatInt(hi, 10), lo < 0
	}
	for _, st := range c.Machine.InUse() {
		a.Streams = append(a.Streams, streamView{ID: st.ID.String(), Name: st.Name})
	}
	var typed []int64
	for i, r := range e.Readings {
		v := readingView{ID: "reading-" + a.ID + "-" + strconv.Itoa(i), Label: f.Words.T("station.part", i+1),
			Heading: f.Words.T("station.measure", i+1, s.Size), Raw: r.Raw, Problem: r.Problem, First: r.First}
		if s.Size == 1 {
			v.Label, v.Heading = f.Words.T("station.the-part"), f.Words.T("station.measure-one")
		} else if len(a.Streams) > 0 { // the name of the stream is to have room behind it
			v.Heading = f.Words.T("station.part-of", i+1, s.Size)
		}
		if r.Keyed != uuid.Nil {
			v.Keyed = r.Keyed.String()
		}
		if len(a.Streams) > 0 {
			v.Stream, v.From = r.Stream.String(), c.Machine.StreamName(r.Stream)
		}
		if r.OK {
			typed = append(typed, r.Units)
		}
		a.Readings = append(a.Readings, v)
	}
	a.Falls = newFalls(f, c, typed)
	return a
}

// otherSign is the decimal sign that the language does not write. It is taken as well,
// and the key says so.
func otherSign(w *words.Printer) string {
	if w.T("ui.decimal-sign") == "," {
		return "."
	}
	return ","
}

// work is GET /station/{station}: the page that stays open all shift.
func (s *Surface) work(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.SparkLength)
	if err != nil {
		return err
	}
	want := uuid.Nil
	if text := r.URL.Query().Get("measure"); text != "" {
		if want, err = uuid.Parse(text); err != nil {
			return notFound(r)
		}
		if _, ok := characteristicOf(st, want); !ok {
			return notFound(r)
		}
	}
	ui.RememberStation(w, r, st.ID)
	f := ui.FrameOf(r).Format()
	v := workView{Side: newSide(f, st), Done: doneWords(f.Words, r.URL.Query().Get("done"))}
	if p := pick(st, want); len(p.Of) > 0 {
		round := newRound(f, st, p, typesDeviation(r))
		v.Round, v.Doubt = &round, gaugeDoubts(f, p.Of)
	} else {
		v.Idle = newIdle(f, st)
	}
	return s.renderWork(w, r, http.StatusOK, st, v)
}

// workView is the working page.
type workView struct {
	Side  sideView
	Round *roundView
	Idle  idleView
	Done  string
	Doubt []string // gauges of this round that are not to be trusted
}

func (s *Surface) renderWork(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, v workView) error {
	shell := s.shell(r, st, st.Name)
	shell.OwnMain = true
	shell.Topics = []string{ui.TopicStation(st.ID)}
	shell.Scripts = []string{"js/station-sent.js"}
	if v.Round != nil {
		v.Round.Draft = draftView{Station: st.ID.String(), Person: shell.Person.ID.String(), Tablet: shell.OnTablet()}
		shell.Scripts = append(shell.Scripts, "js/station-round.js")
	}
	return ui.Render(w, r, status, workPage(shell, v))
}

// shell is the page around everything at one station.
func (s *Surface) shell(r *http.Request, st plant.StationState, title string) ui.Shell {
	shell := ui.ShellFor(r, ui.Station, title)
	if r.Method != http.MethodGet && r.Method != http.MethodHead {
		shell.Path = formPath(r.URL.Path, shell.Path)
	}
	shell.Bar = placeBar(shell.Words, st)
	return shell
}

// posts are the last parts of addresses that take what a form sends and show no page.
var posts = []string{"/round", "/take", "/step", "/close", "/verify", "/not-taken"}

// formPath is the page of a form that was sent, to come back to: where it was sent from,
// with its query, or what is above where it was sent to.
func formPath(sentTo, from string) string {
	for _, p := range posts {
		sentTo = strings.TrimSuffix(sentTo, p)
	}
	if at, _, _ := strings.Cut(from, "?"); at == sentTo {
		return from
	}
	return sentTo
}

func typesDeviation(r *http.Request) bool {
	c, err := r.Cookie(entryCookie)
	return err == nil && c.Value == deviationEntry
}

// doneWords says what was just recorded. It knows its words; the address cannot bring
// others along.
func doneWords(w *words.Printer, key string) string {
	if key == "" || !w.Has("station.done."+key) {
		return ""
	}
	return w.T("station.done." + key)
}

// back leads to the working page and says there what was recorded.
func back(w http.ResponseWriter, r *http.Request, station uuid.UUID, done string) {
	to := path(station)
	if done != "" {
		to += "?" + url.Values{"done": {done}}.Encode()
	}
	ui.Redirect(w, r, to)
}
