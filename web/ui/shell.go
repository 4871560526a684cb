package ui

import (
	"net/http"
	"net/url"

	"github.com/a-h/templ"

	"holdfast/internal/plant"
	"holdfast/static"
)

// Surface is the part of the program that a page belongs to. It is the class of
// the body and decides which style sheets it has.
type Surface string

const (
	Station Surface = "station"
	Board   Surface = "board"
	Desk    Surface = "desk"
	Admin   Surface = "admin"
	Door    Surface = "door"
	Calls   Surface = "calls"
	Account Surface = "account"
)

// Shell is the page around a surface's content. ShellFor fills it; a handler sets
// what its page has of its own.
type Shell struct {
	Frame
	Format  Format
	Surface Surface
	Title   string // of the window, before the plant's name
	Path    string // this page with its query, to come back to

	Bar     templ.Component // in the top bar after the name of the product: the place, a navigation
	BarEnd  templ.Component // in the top bar before the person
	Bare    bool            // no top bar at all
	OwnMain bool            // the content brings its <main id="main">, because something stands beside it

	Topics  []string // that /live pushes into the page; none: the page is not live
	Styles  []string // files of static/ beyond those of the surface
	Scripts []string // modules of static/ beyond the live one
}

// ShellFor makes the shell of a page.
func ShellFor(r *http.Request, s Surface, title string) Shell {
	f := FrameOf(r)
	path := r.URL.RequestURI()
	if r.Method != http.MethodGet && r.Method != http.MethodHead {
		path = refererPath(r)
	}
	return Shell{Frame: f, Format: f.Format(), Surface: s, Title: title, Path: LocalPath(path)}
}

// accountPath leads to one's own page and back here; on that page it leads to itself.
func (s Shell) accountPath() string {
	if s.Surface == Account {
		return s.Path
	}
	return AccountPath(s.Path)
}

// windowTitle is what the browser's tab says.
func (s Shell) windowTitle() string {
	name := s.Plant.Name
	if name == "" {
		name = s.Words.T("ui.product")
	}
	if s.Title == "" {
		return name
	}
	return s.Words.T("ui.title", s.Title, name)
}

// sheets are the style sheets of each surface, after those that all have.
var sheets = map[Surface][]string{
	Station: {"css/chart.css", "css/station.css", "css/reach.css", "css/station-owner.css"},
	Board:   {"css/chart.css", "css/board.css", "css/reach.css"},
	Desk:    {"css/chart.css", "css/desk.css", "css/reach.css"},
	Admin:   {"css/admin.css", "css/setup.css"},
	Door:    {"css/door.css"},
	Calls:   {"css/callpages.css"},
	Account: {"css/account.css"},
}

func (s Shell) styles() []string {
	all := []string{"vendor/modern-normalize/modern-normalize.css", "css/tokens.css", "css/base.css", "css/shell.css", "css/calls.css"}
	if s.SignedIn {
		all = append(all, "css/lock.css")
	}
	return urls(all, sheets[s.Surface], s.Styles)
}

func (s Shell) scripts() []string {
	var all []string
	if len(s.topics()) > 0 {
		all = append(all, "js/live.js")
	}
	if s.locks() {
		all = append(all, "js/lock.js")
	}
	if s.Surface == Station {
		all = append(all, TypedScript)
	}
	if s.SignedIn {
		all = append(all, "js/session.js")
	}
	all = append(all, "js/problem.js")
	return urls(all, s.Scripts)
}

// fonts are asked for before the style sheets are read, so that no text jumps.
func (s Shell) fonts() []string {
	all := []string{"fonts/atkinson-hyperlegible-next-latin-wght-normal.woff2"}
	if s.Surface != Door {
		all = append(all, "fonts/ibm-plex-sans-greek-wght-normal.woff2") // mu and sigma
	}
	return urls(all)
}

func urls(lists ...[]string) []string {
	var all []string
	for _, list := range lists {
		for _, name := range list {
			all = append(all, static.URL(name))
		}
	}
	return all
}

// bodyAttributes tell scripts who is signed in and whether others are here too, and the
// live one where to listen and where to go when the session has ended.
func (s Shell) bodyAttributes() templ.Attributes {
	a := templ.Attributes{"class": string(s.Surface)}
	if s.SignedIn {
		a["data-person"] = s.Person.ID.String()
		a["data-shared"] = s.OnTablet()
	}
	if topics := s.topics(); len(topics) > 0 {
		a["data-live"] = "/live?" + url.Values{"topic": topicsIn(s.Words, topics)}.Encode()
		if len(s.Topics) > 0 {
			a["data-sign-in"] = SignInPath(s.Path)
		} else {
			a["data-live-stay"] = true // what is being typed here is not thrown away
		}
	}
	return a
}

// called reports whether the page is one of somebody who is called about what nobody
// takes.
func (s Shell) called() bool { return s.SignedIn && s.Person.May(plant.AnswerCalls) && !s.Bare }

// topics are those of the page and the calls.
func (s Shell) topics() []string {
	if !s.called() {
		return s.Topics
	}
	return append(s.Topics[:len(s.Topics):len(s.Topics)], TopicCalls)
}

// zone is the name of the plant's time zone for scripts.
func (s Shell) zone() string { return s.Plant.Location.String() }
