// Package ui is what the surfaces share: the page around their content, the one
// adapter that turns errors into answers, forms, guards, and how times, numbers
// and states are written. It knows the domain and no store; surfaces build on it
// and not on one another.
//
// # A handler
//
//	func (h *Handler) Routes(r chi.Router) {
//		r.With(ui.Require(plant.SeeBoard)).Get("/board", ui.Handle(h.log, h.show))
//	}
//
//	func (h *Handler) show(w http.ResponseWriter, r *http.Request) error {
//		lines, err := h.lines.Board(r.Context())
//		if err != nil {
//			return err // a *plant.Error becomes its page, all else a reference number
//		}
//		shell := ui.ShellFor(r, ui.Board, "Board")
//		shell.Topics = []string{"board"} // what /live pushes into this page
//		shell.Scripts = []string{"js/board.js"}
//		return ui.Render(w, r, http.StatusOK, Page(shell, view(shell.Format, lines)))
//	}
//
// and its page:
//
//	templ Page(s ui.Shell, v View) {
//		@ui.Page(s) {
//			<h1>{ v.Title }</h1>
//		}
//	}
//
// The frame of a request (person, plant, now, theme, words) is put there once by
// the router; ShellFor reads it. Anything that is pushed rather than requested
// makes its Format by NewFormat.
//
// # Answers to errors
//
// Handle answers a *plant.Error with its message and the status of its kind (422,
// 404, 409, 403), an *HTTPError with its own, and everything else with 500 and a
// reference number that also stands in the log. A browser that navigates gets a
// page, a script that fetches gets the message alone as an element with
// role="alert", and who accepts only JSON gets JSON. A form that is to be shown
// again with what was typed is the handler's own to render, with status 422.
package ui
