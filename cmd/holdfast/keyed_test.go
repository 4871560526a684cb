package main

import (
	"context"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// roundForm is a round of diameters as the page sends it, keyed by these people.
func (r *running) roundForm(keyed ...string) url.Values {
	id := r.Diameter.ID.String()
	form := url.Values{"round": {uuid.Must(uuid.NewV7()).String()}, "characteristic": {id}, "setup-" + id: {"1"},
		"reading-" + id: {"14.990", "14.991", "14.992", "14.990", "14.991"}}
	for len(keyed) > 0 && len(form["keyed-"+id]) < 5 {
		form["keyed-"+id] = append(form["keyed-"+id], keyed[len(form["keyed-"+id])%len(keyed)])
	}
	return form
}

func (r *running) lastKeyed(t testing.TB) (keyed []uuid.UUID) {
	t.Helper()
	if err := r.Pool().QueryRow(context.Background(), `select keyed_by from subgroup where characteristic_id = $1 order by taken_at desc, id desc limit 1`,
		r.Diameter.ID).Scan(&keyed); err != nil {
		t.Fatal(err)
	}
	return keyed
}

// TestReadingsKeepWhoKeyedThem: of those who signed in at the tablet, and of nobody else.
func TestReadingsKeepWhoKeyedThem(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	r.badge(t, r.Supervisor.ID, "1003")
	save := "/station/" + r.Station.ID.String() + "/round"
	v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet", Station: r.Station.ID})
	op, sup := r.Operator.ID, r.Supervisor.ID

	v.signInByBadge("1001", pin)
	if res, body := v.post(save, r.roundForm(sup.String())); res.StatusCode != http.StatusUnprocessableEntity || !strings.Contains(body, "not signed in at this tablet") {
		t.Errorf("keyed by somebody who was never here: %d", res.StatusCode)
	}
	v.signInByBadge("1003", pin)
	for _, tc := range []struct {
		name string
		form url.Values
		want []uuid.UUID
	}{
		{"both", r.roundForm(op.String(), sup.String()), []uuid.UUID{op, sup, op, sup, op}},
		{"one, not the sender", r.roundForm(op.String()), []uuid.UUID{op}},
		{"a form that does not say", r.roundForm(), []uuid.UUID{sup}},
	} {
		r.Clock.Advance(60e9)
		if res, body := v.post(save, tc.form); res.StatusCode != http.StatusSeeOther {
			t.Fatalf("keyed by %s: %d\n%s", tc.name, res.StatusCode, body)
		}
		if got := r.lastKeyed(t); !slices.Equal(got, tc.want) {
			t.Errorf("keyed by %s: %v, want %v", tc.name, got, tc.want)
		}
	}
	away := r.visit(t, "operator1")
	if res, _ := away.post(save, r.roundForm(sup.String())); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("away from a tablet, keyed by somebody else: %d, want 422", res.StatusCode)
	}
	if differ, err := r.CheckRecord(context.Background()); err != nil || len(differ) > 0 {
		t.Errorf("the record differs: %v, %v", differ, err)
	}
}

// TestASessionHoldsWhereItBegan: what a tablet's browser holds is worth nothing in
// another, and a new secret ends what the old one began.
func TestASessionHoldsWhereItBegan(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	at := "/station/" + r.Station.ID.String()
	v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet", Station: r.Station.ID})
	v.signInByBadge("1001", pin)
	if res, _ := v.get(at); res.StatusCode != http.StatusOK {
		t.Fatalf("at the tablet: %d", res.StatusCode)
	}
	base, err := url.Parse(r.url)
	if err != nil {
		t.Fatal(err)
	}
	thief := r.visit(t, "")
	for _, c := range v.http.Jar.Cookies(base) {
		if c.Name == "session" {
			thief.http.Jar.SetCookies(base, []*http.Cookie{c})
		}
	}
	if res, _ := thief.get(at); res.StatusCode != http.StatusSeeOther {
		t.Errorf("with the cookie of the session alone: %d, want the way to the sign-in page", res.StatusCode)
	}

	p := r.visit(t, "operator1")
	r.Clock.Advance(60e9)
	if err := r.SetSecret(context.Background(), r.Operator.ID, "x", r.Administrator.ID); err != nil {
		t.Fatal(err)
	}
	r.program.sessions.Forget(r.Operator.ID)
	if res, _ := p.get(at); res.StatusCode != http.StatusSeeOther {
		t.Errorf("after the secret was replaced: %d, want the way to the sign-in page", res.StatusCode)
	}
}
