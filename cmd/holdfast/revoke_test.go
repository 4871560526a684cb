package main

import (
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"testing"
	"time"

	"github.com/gorilla/websocket"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// outWithin is how soon a revoked device is out: its sockets closed by the server, counted
// from the answer to whoever revoked it. The page that shows it needs a browser to load
// another page, which a busy machine may take its time for.
const (
	outWithin  = time.Second
	seenWithin = 4 * time.Second
)

func middle(took []time.Duration) time.Duration {
	took = slices.Sorted(slices.Values(took))
	return took[len(took)/2]
}

// revoke sends the administrator's request and returns when it was answered.
func (r *running) revoke(t testing.TB, administrator *visitor, d plant.Device) time.Time {
	t.Helper()
	if res, body := administrator.post("/admin/devices/"+d.ID.String()+"/revoke", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("revoking %s: %s\n%.300s", d.Name, res.Status, body)
	}
	return time.Now()
}

// closing waits for the end of a socket and tells when it came.
func closing(conn *websocket.Conn) <-chan time.Time {
	at := make(chan time.Time, 1)
	go func() {
		for {
			if _, _, err := conn.ReadMessage(); err != nil {
				at <- time.Now()
				return
			}
		}
	}()
	return at
}

// TestARevokedDeviceIsOutWithinASecond revokes on one server; the devices hang on that one
// and on another on the same database. The clock of the plant stands still, so nothing that
// a server remembers runs out by itself: what counts is that it is told.
func TestARevokedDeviceIsOutWithinASecond(t *testing.T) {
	t.Parallel()
	first := serve(t)
	second := serveOn(t, first.Plant, first.Clock.Now)
	administrator := first.visit(t, "administrator1")
	first.badge(t, first.Operator.ID, "1001")
	for name, r := range map[string]*running{"the same server": first, "another server": second} {
		t.Run(name, func(t *testing.T) {
			var took []time.Duration
			for i := range 7 {
				no := name + " " + strconv.Itoa(i)
				tablet, d := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet " + no, Station: r.Station.ID})
				tablet.signInByBadge("1001", pin)
				wall, w := r.visitOn(t, plant.Device{Kind: plant.Wall, Name: "Wall " + no})
				for _, one := range []struct {
					v     *visitor
					d     plant.Device
					topic string
				}{{tablet, d, ui.TopicStation(r.Station.ID)}, {wall, w, ui.TopicBoard}} {
					conn := one.v.dial(one.topic)
					hears(t, conn, 30*time.Second, `"type":"state"`)
					closed := closing(conn)
					answered := first.revoke(t, administrator, one.d)
					select {
					case at := <-closed:
						took = append(took, max(0, at.Sub(answered)))
					case <-time.After(20 * time.Second):
						t.Fatalf("the socket of %s goes on", one.d.Name)
					}
					// Whoever reads the page now is told, and the session is worth nothing.
					if res, body := one.v.get("/station/" + r.Station.ID.String()); res.StatusCode != http.StatusSeeOther {
						t.Errorf("%s, revoked: %s\n%.300s", one.d.Name, res.Status, body)
					}
				}
				if res, _ := tablet.post("/sign-in/badge", url.Values{"badge": {"1001"}, "pin": {pin}}); res.StatusCode != http.StatusForbidden {
					t.Errorf("badge and PIN at a revoked tablet: %s", res.Status)
				}
			}
			t.Logf("on %s the server closed the socket after %v (median of %d; the longest %v)", name, middle(took), len(took), slices.Max(took))
			if m := middle(took); m > outWithin {
				t.Errorf("on %s a revoked device keeps its socket for %v, want at most %v", name, m, outWithin)
			}
		})
	}
}

// TestARevokedTabletSaysSo: what the person in front of it sees, on either server.
func TestARevokedTabletSaysSo(t *testing.T) {
	t.Parallel()
	first := serve(t)
	second := serveOn(t, first.Plant, first.Clock.Now)
	administrator := first.visit(t, "administrator1")
	first.badge(t, first.Operator.ID, "1001")
	b := browsertest.Start(t)
	for name, r := range map[string]*running{"the same server": first, "another server": second} {
		var took []time.Duration
		for i := range 3 {
			no := name + " " + strconv.Itoa(i)
			p, d := r.tabletPage(t, b, plant.Device{Kind: plant.Tablet, Name: "Tablet " + no, Station: r.Station.ID})
			badgeIn(p, "1001")
			p.Open("/station/" + r.Station.ID.String())
			p.WaitFor(`document.querySelector("[data-live-state]")?.textContent.trim() === "live"`)
			answered := first.revoke(t, administrator, d)
			p.WaitFor(find("[data-testid=revoked]"))
			took = append(took, time.Since(answered))
		}
		t.Logf("on %s the tablet showed it after %v (median of %d; the longest %v)", name, middle(took), len(took), slices.Max(took))
		if m := middle(took); m > seenWithin {
			t.Errorf("on %s it takes %v until a revoked tablet says so, want at most %v", name, m, seenWithin)
		}
	}
}

// tabletPage is a browser that was made a device by typing its code.
func (r *running) tabletPage(t testing.TB, b *browsertest.Browser, d plant.Device) (*browsertest.Page, plant.Device) {
	t.Helper()
	code, err := r.MakeDeviceCode(t.Context(), d, r.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	p := b.Person(r.url)
	p.Open("/enrol")
	p.WaitFor(find("[data-pad-keys][data-scripted]"))
	p.Fill("#code", code.Code)
	p.Click("[data-pad-form] button[type=submit]")
	p.WaitFor(`!location.pathname.startsWith("/enrol") && document.readyState === "complete"`)
	return p, r.deviceNamed(t, d.Name)
}
