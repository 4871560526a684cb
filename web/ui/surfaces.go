package ui

import "github.com/google/uuid"

// surfaces are the ways to the surfaces that the router opens to the person. There are
// none on a tablet, which has its place, and none where the only one is the page's own.
func (s Shell) surfaces() []surfaceLink {
	if !s.SignedIn || s.OnTablet() && s.Device.Station != uuid.Nil {
		return nil
	}
	var out []surfaceLink
	for _, l := range []struct {
		of         Surface
		href, text string
	}{
		{Station, "/station?all", s.Words.T("ui.surface.station")},
		{Board, "/board", s.Words.T("ui.surface.board")},
		{Desk, "/desk", s.Words.T("ui.surface.desk")},
		{Admin, "/admin", s.Words.T("ui.surface.admin")},
	} {
		if s.Person.May(ActionFor(l.of)) {
			out = append(out, surfaceLink{Href: l.href, Text: l.text, Here: l.of == s.Surface})
		}
	}
	if len(out) == 1 && out[0].Here {
		return nil
	}
	return out
}
