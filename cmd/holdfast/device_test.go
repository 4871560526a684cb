package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

const pin = "274913"

// enrol lets a device in as a program would: a code, and the token that it is worth.
func (r *running) enrol(t testing.TB, d plant.Device) (plant.Device, string) {
	t.Helper()
	code, err := r.MakeDeviceCode(context.Background(), d, r.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	v := r.visit(t, "")
	res, body := v.postJSON("/enrol", url.Values{"code": {code.Code}})
	if res.StatusCode != http.StatusOK {
		t.Fatalf("enrolling %s: %s\n%s", d.Name, res.Status, body)
	}
	var told struct{ Device, Kind, Name, Token string }
	if err := json.Unmarshal([]byte(body), &told); err != nil {
		t.Fatal(err)
	}
	got, err := r.Device(context.Background(), uuid.MustParse(told.Device))
	if err != nil || string(got.Kind) != told.Kind || got.Name != d.Name {
		t.Fatalf("enrolled %+v, %v; told %+v", got, err, told)
	}
	return got, told.Token
}

// visitOn is a browser that becomes a tablet or a wall screen by typing the code.
func (r *running) visitOn(t testing.TB, d plant.Device) (*visitor, plant.Device) {
	t.Helper()
	code, err := r.MakeDeviceCode(context.Background(), d, r.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	v := r.visit(t, "")
	if res, body := v.post("/enrol", url.Values{"code": {code.Code[:4] + " " + code.Code[4:]}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("enrolling %s: %s\n%s", d.Name, res.Status, body)
	}
	return v, r.deviceNamed(t, d.Name)
}

func (r *running) person(t testing.TB, login string, roles ...plant.Role) plant.Person {
	t.Helper()
	p := plant.Person{ID: uuid.Must(uuid.NewV7()), Login: login, Name: "Person " + login, Roles: roles, Active: true}
	if err := r.AddPerson(context.Background(), p, "", uuid.Nil); err != nil {
		t.Fatal(err)
	}
	return p
}

// hash is what is stored of a secret.
func (r *running) hash(t testing.TB, s auth.Secret) string {
	t.Helper()
	hasher, err := auth.NewHasher(cheap, 1)
	if err != nil {
		t.Fatal(err)
	}
	hash, err := hasher.Hash(context.Background(), s)
	if err != nil {
		t.Fatal(err)
	}
	return hash
}

// badge gives somebody a badge with the PIN of all tests.
func (r *running) badge(t testing.TB, person uuid.UUID, badge string) {
	t.Helper()
	if err := r.SetBadge(context.Background(), person, badge, r.hash(t, pin), uuid.Nil); err != nil {
		t.Fatal(err)
	}
}

// postJSON sends a form as a program that wants JSON.
func (v *visitor) postJSON(path string, form url.Values) (*http.Response, string) {
	v.t.Helper()
	return v.send(http.MethodPost, path, "application/x-www-form-urlencoded", "application/json", strings.NewReader(form.Encode()))
}

func (v *visitor) signInByBadge(badge, pin string) {
	v.t.Helper()
	if res, body := v.post("/sign-in/badge", url.Values{"badge": {badge}, "pin": {pin}}); res.StatusCode != http.StatusSeeOther {
		v.t.Fatalf("signing in with badge %s: %s\n%s", badge, res.Status, body)
	}
}

// A sender has no browser: its code comes as the line that fetches the token.
func TestTheCodeOfASender(t *testing.T) {
	t.Parallel()
	r := serve(t)
	code, err := r.MakeDeviceCode(context.Background(), plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID}, r.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	_, body := r.visit(t, "administrator1").get("/admin/devices")
	if want := "curl -X POST " + r.url + "/enrol -H &#39;Accept: application/json&#39; -d code=" + code.Code; !strings.Contains(body, want) || strings.Contains(body, "in the browser of the device") {
		t.Errorf("no %q, or a browser is spoken of", want)
	}
}

// Whoever stands at a tablet chooses its language before signing in, and it stays.
func TestTheLanguageOfATablet(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	if _, body := v.get("/sign-in"); !strings.Contains(body, "pad-form") || !strings.Contains(body, `name="language" value="es"`) {
		t.Fatalf("a tablet's sign-in offers no language:\n%s", body)
	}
	v.post("/language", url.Values{"language": {"es"}, "to": {"/sign-in"}})
	for _, path := range []string{"/sign-in", "/sign-in?locked=yes", "/enrol"} {
		if _, body := v.get(path); !strings.Contains(body, `lang="es"`) || strings.Contains(body, `<html lang="en"`) {
			t.Errorf("%s is not in the language that was chosen", path)
		}
	}
}

// Nobody becomes something because a box was ticked already.
func TestSomebodyNewHasNoRoleYet(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "administrator1")
	_, body := v.get("/admin/people")
	if _, form, found := strings.Cut(body, `data-testid="add-person"`); !found || !strings.Contains(form, `value="operator"`) || strings.Contains(form, " checked") {
		t.Error("a role is ticked for somebody new, or none can be")
	}
	if _, body := v.get("/admin/messages"); strings.Contains(body, "Every message was delivered") || !strings.Contains(body, "No target is set") {
		t.Error("with no target the page says that messages were delivered")
	}
}

// TestACodeCanBeScanned at the address that devices reach the server by, and stands in the
// field then; where only the machine itself reaches the server, that is said.
func TestACodeCanBeScanned(t *testing.T) {
	t.Parallel()
	r := serve(t)
	code, err := r.MakeDeviceCode(t.Context(), plant.Device{Kind: plant.Wall, Name: "Wall 1"}, r.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	v := r.visit(t, "administrator1")
	page := func(host string) string {
		req, err := http.NewRequest(http.MethodGet, v.base+"/admin/devices", nil)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range v.http.Jar.Cookies(req.URL) {
			req.AddCookie(c)
		}
		req.Host = host
		res, err := http.DefaultTransport.RoundTrip(req)
		if err != nil {
			t.Fatal(err)
		}
		defer res.Body.Close()
		body, err := io.ReadAll(res.Body)
		if err != nil {
			t.Fatal(err)
		}
		return string(body)
	}
	if body := page("10.20.30.40:8443"); !strings.Contains(body, `data-testid="qr"`) || !strings.Contains(body, "http://10.20.30.40:8443/enrol in the browser") || strings.Contains(body, "only-here") {
		t.Error("at an address for others:", body)
	}
	for _, host := range []string{"localhost:8080", "127.0.0.1:8080", "[::1]:8080"} {
		if body := page(host); strings.Contains(body, `data-testid="qr"`) || !strings.Contains(body, `data-testid="only-here"`) {
			t.Errorf("at %s, which leads nowhere else", host)
		}
	}
	if _, body := r.visit(t, "").get("/enrol?code=" + code.Code); !strings.Contains(body, `value="`+code.Code+`"`) {
		t.Error("the code that was scanned does not stand in the field")
	}
}

// TestLinesOfABadGaugeMoveNoKey: what could not be taken is one low line, closed and open,
// on an upright tablet and on one that lies.
func TestLinesOfABadGaugeMoveNoKey(t *testing.T) {
	t.Parallel()
	r := serve(t)
	_, token := r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	v := r.visit(t, "")
	v.token = token
	p := r.signIn(t, browsertest.Start(t), "operator1")
	p.Open("/station/" + r.Station.ID.String() + "?measure=" + r.Diameter.ID.String())
	p.WaitFor(`document.querySelector("[data-live-state]")?.textContent.trim() === "live"`)
	const key = `document.querySelector(".pad [data-key='5'], .pad .key").getBoundingClientRect().top`
	tops := map[string]string{}
	sizes := map[string][2]int64{"upright": {800, 1280}, "lying": {1280, 800}}
	for name, size := range sizes {
		p.Size(size[0], size[1])
		tops[name] = p.Value(key)
	}
	for i := range 5 {
		r.Clock.Advance(time.Second)
		v.api("lines", map[string]any{"id": newNumber(), "line": fmt.Sprintf("0.590%d in", i), "why": "unit"}, 200)
	}
	p.WaitFor(`document.querySelector("[data-testid=not-taken] summary")?.textContent.includes("More than 3")`)
	for name, size := range sizes {
		p.Size(size[0], size[1])
		p.Want(name+": the key beside closed lines", key, tops[name])
		p.Click("[data-testid=not-taken] summary")
		p.Want(name+": the key under open lines", key, tops[name])
		p.WaitFor(`document.querySelector("[data-testid=not-taken] form button").getClientRects().length === 1`)
		p.Accessible(name + ": lines that could not be taken")
		p.Click("[data-testid=not-taken] summary")
	}
	p.Click("[data-testid=not-taken] summary")
	p.Click("[data-testid=not-taken] form button")
	p.WaitFor(`!document.querySelector("[data-testid=not-taken]")`)
}
