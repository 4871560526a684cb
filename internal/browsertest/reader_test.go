package browsertest

import (
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
)

// TestReadersOfTheirOwnAreHeard: each check finds what it is there for, and nothing on a
// page that is as it should be.
func TestReadersOfTheirOwnAreHeard(t *testing.T) {
	t.Parallel()
	const bad = `<!DOCTYPE html><html lang="en"><style>
		.bare { border: 0 } .on a[aria-current] { background: yellow } .on a { text-decoration: none }
		.fill { width: 40px; height: 9px; background: green } .gone { background: Highlight; color: Canvas }
		.on a:focus { outline: 3px solid } .still:focus { outline: none } .spin { animation: spin 2s infinite } @keyframes spin { to { rotate: 1turn } } .slow { transition: color 1s }
		</style><button class="bare">Go</button><p class="on"><a href="#a" aria-current="page">A</a><a href="#b">B</a></p><div><i class="fill" style="display:block"></i></div>
		<p class="gone">Letters</p><svg width="20" height="20"><circle r="9" fill="#123456"/></svg><a class="still" href="#c">C</a><p class="spin">x</p><p class="slow">y</p></html>`
	const good = `<!DOCTYPE html><html lang="en"><style>
		.on a[aria-current] { font-weight: 700 } .gone { background: Highlight; color: Canvas; forced-color-adjust: none }
		@media (forced-colors: active) { circle { fill: CanvasText } i { border: 1px solid } }
		a:focus-visible, button:focus-visible { outline: 3px solid Highlight }
		@media (prefers-reduced-motion: no-preference) { .slow { transition: color 1s } }
		</style><button>Go</button><p class="on"><a href="#a" aria-current="page">A</a><a href="#b">B</a></p><div><i style="display:block;width:40px;height:9px;background:green"></i></div>
		<p class="gone">Letters</p><svg width="20" height="20"><circle r="9" fill="#123456"/></svg><a href="#c">C</a><p class="slow">y</p></html>`
	server := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		_, _ = w.Write([]byte(map[string]string{"/bad": bad, "/good": good}[r.URL.Path]))
	}))
	t.Cleanup(server.Close)
	p := Start(t).Person(server.URL)
	for path, want := range map[string][]string{
		"/good": nil,
		"/bad": {"button.bare", "only its background tells a", "i.fill", "the letters of p.gone", "circle in svg is drawn in rgb(18, 52, 86)",
			"nothing shows that a.still", "p.spin moves for 2000 ms", "p.spin has an animation", "p.slow has a transition"},
	} {
		p.Open(path)
		p.Media(ForcedColours)
		found := append(p.LostInForcedColours(), p.FocusUnseen()...)
		p.Media(ReducedMotion)
		found = append(found, p.Moves()...)
		p.Media()
		for _, f := range found {
			known := false
			for _, w := range want {
				known = known || strings.Contains(f, w)
			}
			if !known {
				t.Errorf("%s: found %q", path, f)
			}
		}
		for _, w := range want {
			if !strings.Contains(strings.Join(found, "\n"), w) {
				t.Errorf("%s: %q was not found in %q", path, w, found)
			}
		}
	}
}
