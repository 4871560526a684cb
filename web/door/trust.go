package door

import (
	"crypto/x509"
	"log/slog"
	"net/http"
	"time"

	"github.com/go-chi/chi/v5"

	"holdfast/internal/certs"
	"holdfast/web/ui"
)

// AuthorityAddress is where the plant's own authority is shown and how to trust it. It is
// open to everybody: a tablet needs it before anybody can sign in there safely.
const AuthorityAddress = "/authority"

const (
	authorityFile = AuthorityAddress + ".crt"
	authorityPEM  = AuthorityAddress + ".pem"
)

// Trust serves the certificate of the plant's own authority.
type Trust struct {
	Log       *slog.Logger
	Authority *x509.Certificate
}

// Routes adds the authority's addresses to a router.
func (t *Trust) Routes(r chi.Router) {
	r.Get(AuthorityAddress, ui.Handle(t.Log, t.show))
	r.Get(authorityFile, t.file)
	r.Get(authorityPEM, t.pem)
}

// trust is what the page shows.
type trust struct {
	Fingerprint [2]string // in two lines, as people compare it
	Name, Ends  string
	Names       []string // that the authority may speak for, besides private addresses
	Devices     []string // kinds of devices, by the last part of their keys
}

func (t *Trust) show(w http.ResponseWriter, r *http.Request) error {
	s := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("trust.title"))
	print := certs.Fingerprint(t.Authority)
	half := (len(print) + 1) / 2
	return ui.Render(w, r, http.StatusOK, trustPage(s, trust{
		Fingerprint: [2]string{print[:half-1], print[half:]},
		Name:        t.Authority.Subject.CommonName,
		Ends:        s.Format.Date(t.Authority.NotAfter),
		Names:       t.Authority.PermittedDNSDomains,
		Devices:     []string{"android", "ipad", "windows", "macos", "linux"},
	}))
}

// file is the certificate in DER under the type that devices offer to install.
func (t *Trust) file(w http.ResponseWriter, _ *http.Request) {
	t.send(w, "application/x-x509-ca-cert", ".crt", t.Authority.Raw)
}

// pem is the certificate as curl and the senders of this program are given it.
func (t *Trust) pem(w http.ResponseWriter, _ *http.Request) {
	t.send(w, "application/x-pem-file", ".pem", certs.PEM(t.Authority))
}

func (t *Trust) send(w http.ResponseWriter, kind, ending string, body []byte) {
	h := w.Header()
	h.Set("Content-Type", kind)
	h.Set("Content-Disposition", `attachment; filename="holdfast-authority-`+t.Authority.NotBefore.Format(time.DateOnly)+ending+`"`)
	h.Set("Cache-Control", "no-store")
	_, _ = w.Write(body)
}
