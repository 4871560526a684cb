package main

import (
	"context"
	"log/slog"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/browsertest"
	"holdfast/internal/localpg"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// TestPeopleBesideAServedCluster: the commands work while another program serves the
// folder, and on a database of the plant's own.
func TestPeopleBesideAServedCluster(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	dir := privateFolder(t)
	served := privateServerIn(t, dir)
	owner := served.ConnString(localpg.Database)
	if err := store.Migrate(ctx, owner); err != nil {
		t.Fatal(err)
	}
	st, err := store.Open(ctx, store.Options{URL: owner})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	d := database{Data: dir}
	for _, step := range []interface {
		Run(context.Context, *slog.Logger) error
	}{
		&userAddCmd{database: d, passwordSource: passwordSource{Make: true}, Login: "Mona", Name: "Mona M.", Role: []string{"administrator"}, Plant: "Kestrel Row", TimeZone: "UTC"},
		&userAddCmd{database: d, passwordSource: passwordSource{Make: true}, Login: "otto", Name: "Otto O.", Role: []string{"operator"}, Plant: "Kestrel Row", TimeZone: "UTC"},
		&userListCmd{database: d},
		&userRolesCmd{database: d, Login: "otto", Role: []string{"supervisor", "operator"}},
		&userPasswordCmd{database: d, passwordSource: passwordSource{Make: true}, Login: "otto"},
		&userDisableCmd{database: d, Login: "otto"},
	} {
		if err := step.Run(ctx, silent); err != nil {
			t.Fatalf("%T: %v", step, err)
		}
	}
	if out, err := printed(t, func() error { return (&auditCmd{database: d}).Run(ctx, silent) }); err != nil || !strings.Contains(out, "What is on record is what was sealed.") {
		t.Errorf("verifying beside the server: %v\n%s", err, out)
	}
	taken := &userAddCmd{database: d, passwordSource: passwordSource{Make: true}, Login: "otto", Name: "Otto P.", Role: []string{"operator"}, Plant: "Kestrel Row", TimeZone: "UTC"}
	if err := taken.Run(ctx, silent); err == nil || told(err) != "Somebody signs in under this name already." {
		t.Errorf("a name that is taken: %v", err)
	}
	if err := (&userEnableCmd{database: d, Login: "nobody"}).Run(ctx, silent); err == nil || told(err) != "There is no such person." {
		t.Errorf("somebody who is not there: %v", err)
	}
	check := checkCmd{database: d, Addr: "127.0.0.1:0"}
	if out, err := says(t, check); !strings.Contains(out, "The private PostgreSQL ") || !strings.Contains(out, " runs, and answers.") {
		t.Errorf("the check beside the server: %v\n%s", err, out)
	}
	if err := (&userDisableCmd{database: d, Login: "mona"}).Run(ctx, silent); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("keeping the last administrator out: %v, want Conflict", err)
	}
	if err := (&userEnableCmd{database: d, Login: "nobody"}).Run(ctx, silent); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("letting nobody in: %v, want NotFound", err)
	}
	seen, err := store.Open(ctx, store.Options{URL: owner})
	if err != nil {
		t.Fatal(err)
	}
	defer seen.Close()
	p, err := seen.PersonByLogin(ctx, "otto")
	if err != nil || p.Active || len(p.Roles) != 2 {
		t.Errorf("otto = %+v, %v; want kept out with two roles", p, err)
	}
	if differ, err := seen.CheckRecord(ctx); err != nil || len(differ) > 0 {
		t.Errorf("the record differs: %v, %v", differ, err)
	}
}

func TestTheFirstPersonComesByAnAddressThatWorksOnce(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	at := pgtest.Database(t)
	clock := storetest.NewClock()
	st, err := store.Open(ctx, store.Options{URL: at, Clock: clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	if err := st.CreatePlant(ctx, plant.Plant{ID: uuid.Must(uuid.NewV7()), Name: "Kestrel Row", Location: time.UTC}); err != nil {
		t.Fatal(err)
	}
	r := serveOn(t, &storetest.Plant{Store: st, URL: at, Clock: clock}, clock.Now)
	path := r.program.first.Path()
	v := r.visit(t, "")
	p := browsertest.Start(t).Person(r.url)
	p.Open(path)
	p.WaitFor(`document.querySelector("main form")`)
	p.ForEverybody("the page for the first person")
	for _, lang := range []string{"de", "es"} {
		speak(p, lang)
		fitsATablet(p, lang, path)
	}
	p.Open("/sign-in")
	p.WaitFor(find("[data-testid=nobody-yet]"))
	for _, lang := range []string{"de", "es"} {
		speak(p, lang)
		fitsATablet(p, lang, "/sign-in")
	}
	if _, body := v.get("/sign-in"); !strings.Contains(body, "Nobody can sign in here yet") || strings.Contains(body, path) {
		t.Error("the sign-in page does not say that there is nobody yet, or gives the address away")
	}
	if res, body := v.get(path); res.StatusCode != http.StatusOK || !strings.Contains(body, "<b>Administrator:</b>") {
		t.Errorf("the address: %d", res.StatusCode)
	}
	if res, _ := v.get(path[:len(path)-4] + "AAAA"); res.StatusCode != http.StatusNotFound {
		t.Errorf("another address: %d, want 404", res.StatusCode)
	}
	form := url.Values{"name": {"Mona M."}, "login": {"mona"}, "password": {secret}, "again": {secret}, "role": {"engineer"}}
	if res, body := v.post(path, form); res.StatusCode != http.StatusUnprocessableEntity || !strings.Contains(body, "must manage") {
		t.Errorf("without managing: %d", res.StatusCode)
	}
	form["role"] = []string{"engineer", "administrator"}
	form.Set("again", "another")
	if res, _ := v.post(path, form); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("two different passwords: %d", res.StatusCode)
	}
	form.Set("again", secret)
	if res, body := v.post(path, form); res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != "/admin/start" {
		t.Fatalf("making the first person: %d to %q\n%s", res.StatusCode, res.Header.Get("Location"), body)
	}
	if res, _ := v.get("/admin/people"); res.StatusCode != http.StatusOK {
		t.Errorf("the first person is not signed in: %d", res.StatusCode)
	}
	other := r.visit(t, "")
	if res, _ := other.get(path); res.StatusCode != http.StatusNotFound {
		t.Errorf("the address once more: %d, want 404", res.StatusCode)
	}
	if _, body := other.get("/sign-in"); strings.Contains(body, "nobody-yet") {
		t.Error("the sign-in page still says that there is nobody")
	}
	if res, _ := other.post(path, form); res.StatusCode != http.StatusNotFound {
		t.Errorf("a second first person: %d, want 404", res.StatusCode)
	}
	r.visit(t, "mona")
	if again := serveOn(t, r.Plant, clock.Now); again.program.first != nil {
		t.Error("with somebody there the address is drawn again")
	}
}
