package main

import (
	"context"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
)

// A machine is moved on its page; its sender, which sends for the old station, is told,
// and what it sent is shown there.
func TestAMachineMovesOnItsPage(t *testing.T) {
	t.Parallel()
	r := serve(t)
	admin := r.visit(t, "administrator1")
	gauge := r.visit(t, "")
	_, gauge.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	page := "/admin/thing/machine/" + r.Machine.ID.String()
	if _, body := admin.get(page); !strings.Contains(body, "A machine that moves to another station takes with it") {
		t.Error("the page does not say what moves")
	}
	if res, body := admin.post(page, url.Values{"name": {r.Machine.Name}, "station": {r.Other.ID.String()}, "rate": {"120"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("moving: %s\n%s", res.Status, body)
	}
	st, err := r.StationState(context.Background(), r.Other.ID, 1)
	if err != nil || len(st.Machines) != 2 || len(st.Characteristics) != 3 {
		t.Errorf("at the new station: %+v, %v", st.Machines, err)
	}
	r.Clock.Advance(time.Second)
	body := gauge.api("rounds", map[string]any{"id": newNumber(), "taken_at": r.Clock.Now(), "entries": []any{
		map[string]any{"characteristic": r.Diameter.ID, "unit": "mm", "readings": []any{"14.991", "14.990", "14.991", "14.990", "14.992"}}}}, 422)
	if !strings.Contains(body, "This station measures no") {
		t.Errorf("told %s", body)
	}
	if _, body := r.visit(t, "operator1").get("/station/" + r.Station.ID.String()); !strings.Contains(body, "Bore gauge") {
		t.Error("the old station does not show what its gauge sent")
	}
	if ds, err := r.CheckRecord(context.Background()); err != nil || len(ds) > 0 {
		t.Errorf("the record differs from the ledger: %v, %v", ds, err)
	}
}
