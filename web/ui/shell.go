package ui

import (
	"net/http"
	"net/url"

	"github.com/a-h/templ"
)

// Surface is the part of the program that a page belongs to. It is the class of
// the body and names the style sheet css/<surface>.css.
type Surface string

const (
	Station Surface = "station"
	Board   Surface = "board"
	Desk    Surface = "desk"
	Admin   Surface = "admin"
	Door    Surface = "door"
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

func (s Shell) styles() []string {
	all := append([]string{"css/holdfast.css", "css/" + string(s.Surface) + ".css"}, s.Styles...)
	for i, name := range all {
		all[i] = s.Asset(name)
	}
	return all
}

func (s Shell) scripts() []string {
	var all []string
	if len(s.Topics) > 0 {
		all = append(all, s.Asset("js/live.js"))
	}
	for _, name := range s.Scripts {
		all = append(all, s.Asset(name))
	}
	return all
}

// bodyAttributes tell the live script where to listen and where to go when the
// session has ended.
func (s Shell) bodyAttributes() templ.Attributes {
	a := templ.Attributes{"class": string(s.Surface)}
	if len(s.Topics) > 0 {
		a["data-live"] = "/live?" + url.Values{"topic": s.Topics}.Encode()
		a["data-sign-in"] = SignInPath(s.Path)
	}
	return a
}

// zone is the name of the plant's time zone for scripts.
func (s Shell) zone() string { return s.Plant.Location.String() }
