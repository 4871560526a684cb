// Package web joins the surfaces to one http.Handler: what every request goes
// through, which address leads where, and what one must be allowed to do to go
// there.
//
// A request passes, in this order: its id, the access log, the frame that all pages
// share, recovery from panics, the security headers, the check of the host name,
// the standard library's guard against cross-site posts, and the limit on bodies.
// After that there are three kinds of address. Files and health checks have no
// session. The live socket only reads its session, so that nothing stands between
// it and the connection. Everything else has a session that is written back.
//
// Surfaces come in as values with a Routes method and do not know one another. A
// surface's whole subtree is guarded by one action (ui.ActionFor); what asks for
// more says so itself with ui.Require. Routes lists what is there, for the test
// that tries every route by every role.
//
// What the caller must still do: give timeouts to its http.Server (and none that
// would cut a socket), shut the hub down beside it, and set Hosts and Secure as
// the installation needs.
package web
