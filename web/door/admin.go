package door

import (
	"log/slog"
	"net/http"

	"github.com/go-chi/chi/v5"

	"holdfast/web/ui"
)

// Admin is what an administrator finds while people are managed from the command
// line: a page that says so.
type Admin struct {
	Log *slog.Logger
}

// Routes adds the page to the router of /admin.
func (a Admin) Routes(r chi.Router) {
	r.Get("/", ui.Handle(a.Log, func(w http.ResponseWriter, r *http.Request) error {
		shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("door.admin-title"))
		return ui.Render(w, r, http.StatusOK, adminPage(shell))
	}))
}
