package browsertest_test

import (
	"fmt"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"holdfast/internal/browsertest"
)

// faults are what the check must find, each on a page of its own.
var faults = map[string]string{
	"wide page":      `<div class="wide">x</div>`,
	"word in a box":  `<p class="narrow">Donaudampfschifffahrtsgesellschaft</p>`,
	"tall text":      `<p class="low">one two three four five six seven eight nine ten</p>`,
	"cut off":        `<div class="cut"><span class="nowrap">one two three four five six seven eight</span></div>`,
	"drawing":        `<svg width="50" height="20"><text x="30" y="15">beyond</text></svg>`,
	"field":          `<input class="narrow" value="14,99400000000">`,
	"buttons":        `<button>One</button><button class="over">Two</button>`,
	"beyond at left": `<p class="left">text</p>`,
}

func TestOverflowIsFound(t *testing.T) {
	t.Parallel()
	const style = `.wide{width:3000px}.narrow{width:60px}.low{width:60px;height:20px}.cut{width:60px;overflow:hidden}.nowrap{white-space:nowrap}.over{margin-left:-20px}.left{margin-left:-40px}`
	server := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		name := strings.ReplaceAll(strings.TrimPrefix(r.URL.Path, "/"), "-", " ")
		fmt.Fprintf(w, `<!doctype html><html lang="en"><style>%s</style><body><p>all well</p><button>One</button> <button>Two</button><input value="14,994">%s`, style, faults[name])
	}))
	t.Cleanup(server.Close)
	p := browsertest.Start(t).Person(server.URL)
	p.Size(800, 600)
	p.Open("/nothing")
	p.NothingOverflows("a page without a fault")
	for name := range faults {
		p.Open("/" + strings.ReplaceAll(name, " ", "-"))
		if found := p.Overflows(); len(found) == 0 {
			t.Errorf("%s is not found", name)
		}
	}
}
