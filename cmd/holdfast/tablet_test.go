package main

import (
	"context"
	"slices"
	"strconv"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

// enrolByHand makes the code on the administrator's page and types it on the device.
func enrolByHand(admin, device *browsertest.Page, kind, name, station string) {
	admin.Open("/admin/devices")
	admin.WaitFor(find("[data-testid=new-device]"))
	admin.Value(find("input[name=kind][value="+kind+"]") + `.click()`)
	admin.Fill("#name", name)
	if station != "" {
		admin.Value(find("#station") + `.value = "` + station + `"`)
	}
	admin.Click("[data-testid=new-device] button[type=submit]")
	admin.WaitFor(find("[data-testid=digits]"))
	admin.Accessible("devices with a code")
	code := admin.Value(find("[data-testid=digits]") + `.textContent`)
	device.Open("/enrol")
	device.WaitFor(find("#code"))
	device.Accessible("typing a code")
	device.FitsWidth("typing a code", 320, 1280)
	device.Size(1280, 800)
	device.Keys(code + "\r")
	admin.WaitFor(`!` + find("[data-testid=digits]")) // the list notices by itself
}

// badgeIn signs in as a scanner and fingers do.
func badgeIn(p *browsertest.Page, badge string) {
	p.WaitFor(`document.activeElement.id === "badge" && document.querySelector("[data-pad-keys][data-scripted]")`)
	p.Keys(badge + "\r")
	p.WaitFor(`document.activeElement.id === "pin"`)
	p.Keys(pin + "\r")
	p.WaitFor(`!location.pathname.startsWith("/sign-in") && document.readyState === "complete"`)
}

const typed = `[...document.querySelectorAll("[data-reading]")].map((i) => i.value).join(" ")`

// sleep moves the clock of a page on, as if nobody had touched it for so long.
func sleep(p *browsertest.Page, d time.Duration) {
	p.Value(`(() => { window.realNow ??= Date.now.bind(Date); window.slept = (window.slept ?? 0) + ` + strconv.FormatInt(d.Milliseconds(), 10) + `; Date.now = () => window.realNow() + window.slept; return window.slept })()`)
}

// TestATabletThroughAShift enrols a tablet and a wall screen, changes the person in the
// middle of a round, is locked by idleness, goes on and saves, and is revoked.
func TestATabletThroughAShift(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	r.badge(t, r.Operator.ID, "1001")
	r.badge(t, r.Supervisor.ID, "1003")
	b := browsertest.Start(t)
	admin := r.signIn(t, b, "administrator1")
	tablet, wall := b.Person(r.url), b.Person(r.url)
	measure := "/station/" + r.Station.ID.String() + "?measure=" + r.Diameter.ID.String()

	enrolByHand(admin, tablet, "tablet", "Tablet 1", r.Station.ID.String())
	tablet.WaitFor(find("#badge"))
	tablet.Accessible("signing in at a tablet")
	tablet.FitsWidth("signing in at a tablet", 320, 1280)
	tablet.Size(1280, 800)
	enrolByHand(admin, wall, "wall", "Wall 1", "")
	wall.WaitFor(`document.querySelector("[data-live-state]")?.textContent.trim() === "live"`)
	wall.Accessible("the board of a wall screen")

	// Two readings by the operator; then the supervisor takes over and goes on.
	badgeIn(tablet, "1001")
	tablet.Open(measure)
	tablet.WaitFor(find("[data-scripted]"))
	tablet.Keys("14.990\r14.991\r")
	tablet.Click("[data-sign-out] button")
	badgeIn(tablet, "1003")
	tablet.WaitFor(find("[data-scripted]"))
	tablet.Want("the draft after the change", typed, "14.990 14.991   ")
	tablet.Want("it says that it was kept", find("[data-kept]")+".hidden", "false")
	tablet.Accessible("a round that was kept")
	tablet.WaitFor(`document.activeElement.id.endsWith("-2")`)
	tablet.Keys("14.992\r")

	// Nobody touches the tablet: it warns, a key keeps it open, and at last it locks.
	sleep(tablet, plant.DefaultLock-25*time.Second)
	tablet.WaitFor(`!` + find("[data-lock-text]") + `.hidden`)
	tablet.Accessible("the warning before the lock")
	tablet.Want("the warning takes no focus", `document.activeElement.matches("[data-reading]")`, "true")
	tablet.Keys("1")
	tablet.WaitFor(find("[data-lock-text]") + `.hidden`)
	tablet.Want("the key was typed too", typed, "14.990 14.991 14.992 1 ")
	sleep(tablet, plant.DefaultLock)
	tablet.WaitFor(find("[data-testid=locked]"))
	tablet.Want("what waits is told", find("[data-draft-waits]")+".textContent", "Readings typed here and not yet saved: 4")
	tablet.Accessible("a locked tablet")
	badgeIn(tablet, "1001")
	tablet.WaitFor(find("[data-scripted]"))
	tablet.Want("the draft after the lock", typed, "14.990 14.991 14.992 1 ")
	tablet.Value(`[...document.querySelectorAll("[data-reading]")][3].focus()`)
	tablet.Keys("14.990\r14.991\r")
	tablet.WaitFor(`document.activeElement.matches("[data-main]")`)
	tablet.Value(`await new Promise((done) => setTimeout(done, 500))`) // longer than a gauge's second Enter
	tablet.Keys("\r")
	tablet.WaitFor(find("[data-testid=verdict]"))
	tablet.WaitFor(`Object.keys(localStorage).every((k) => !k.startsWith("holdfast.draft."))`)

	var keyed []uuid.UUID
	err := r.Pool().QueryRow(context.Background(), `select keyed_by from subgroup where characteristic_id = $1 order by taken_at desc, id desc limit 1`,
		r.Diameter.ID).Scan(&keyed)
	op, sup := r.Operator.ID, r.Supervisor.ID
	if want := []uuid.UUID{op, op, sup, op, op}; err != nil || !slices.Equal(keyed, want) {
		t.Errorf("keyed by %v, %v; want %v", keyed, err, want)
	}

	// Revoked, both are out; how soon is measured elsewhere.
	for _, one := range []struct {
		name string
		page *browsertest.Page
	}{{"Wall 1", wall}, {"Tablet 1", tablet}} {
		if one.page == tablet {
			tablet.Open("/station/" + r.Station.ID.String())
			tablet.WaitFor(`document.querySelector("[data-live-state]")?.textContent.trim() === "live"`)
		}
		d := r.deviceNamed(t, one.name)
		if res, _ := r.visit(t, "administrator1").post("/admin/devices/"+d.ID.String()+"/revoke", nil); res.StatusCode != 303 {
			t.Fatalf("revoking %s: %d", one.name, res.StatusCode)
		}
		one.page.WaitFor(find("[data-testid=revoked]"))
	}
	if differ, err := r.CheckRecord(context.Background()); err != nil || len(differ) > 0 {
		t.Errorf("the record differs: %v, %v", differ, err)
	}
}

func (r *running) deviceNamed(t testing.TB, name string) plant.Device {
	t.Helper()
	all, err := r.Devices(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range all {
		if d.Name == name {
			return d
		}
	}
	t.Fatalf("there is no device %q", name)
	return plant.Device{}
}
