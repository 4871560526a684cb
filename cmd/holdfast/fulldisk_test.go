package main

import (
	"net/http"
	"strings"
	"testing"
	"time"

	"holdfast/internal/browsertest"
)

// TestAFullDiskLosesNoRound plays what PostgreSQL answers when its disk is full, raised by
// a trigger at the table that a round ends in: the operator is told in words, the tablet
// keeps what was typed, the server is up, is not called ready, and goes on by itself once
// there is room.
func TestAFullDiskLosesNoRound(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := t.Context()
	do := func(sql string) {
		t.Helper()
		if _, err := r.Pool().Exec(ctx, sql); err != nil {
			t.Fatal(err)
		}
	}
	do(`create function full_disk() returns trigger language plpgsql as $$ begin
		raise exception 'could not extend file "base/16384/2619": No space left on device' using errcode = '53100'; end $$`)
	do(`create trigger full_disk before insert on subgroup execute function full_disk()`)
	outside := r.visit(t, "")
	ready := func(want int) {
		t.Helper()
		if res, _ := outside.get("/readyz"); res.StatusCode != want {
			t.Errorf("ready: %s, want %d", res.Status, want)
		}
	}
	ready(http.StatusOK)

	p := r.signIn(t, browsertest.Start(t), "operator1")
	page := "/station/" + r.Station.ID.String() + "?measure=" + r.Diameter.ID.String()
	p.Open(page)
	p.WaitFor(`document.querySelector("[data-scripted]")`)
	readings := []string{"14.990", "14.991", "14.992", "14.990", "14.993"}
	for _, v := range readings {
		p.Keys(v + "\r")
	}
	save := func(then string) {
		t.Helper()
		p.WaitFor(`document.querySelector("[data-main]").textContent.trim() === "Save the round"`)
		p.Value(`document.querySelector("[data-main]").focus()`)
		p.Value(`await new Promise((done) => setTimeout(done, 700))`)
		p.Keys("\r")
		p.WaitFor(then)
	}
	save(`document.body.innerText.includes("The server’s disk is full, so nothing was saved.")`)
	p.Accessible("the disk is full")
	ready(http.StatusServiceUnavailable)
	if res, body := outside.get("/healthz"); res.StatusCode != http.StatusOK || !strings.Contains(body, "ok") {
		t.Errorf("the server itself: %s", res.Status)
	}

	// Pages that only note that somebody was there go on being answered.
	do(`create trigger full_disk before insert or update on sessions for each row execute function full_disk()`)
	r.Clock.Advance(2 * time.Minute)
	p.Open("/account/")
	p.Want("a page that records nothing", `performance.getEntriesByType("navigation")[0].responseStatus`, "200")

	// Nothing is on record; the tablet has it all, also after it was switched off and on.
	var kept int
	if err := r.Pool().QueryRow(ctx, `select count(*) from subgroup`).Scan(&kept); err != nil || kept != 0 {
		t.Errorf("%d subgroups on record, %v", kept, err)
	}
	p.Open(page)
	p.WaitFor(`[...document.querySelectorAll("[name^=reading-]")].map((f) => f.value).join(" ") === "` + strings.Join(readings, " ") + `"`)

	do(`drop trigger full_disk on subgroup; drop trigger full_disk on sessions`)
	save(`document.querySelector("[data-testid=verdict]")`)
	ready(http.StatusOK)
	if err := r.Pool().QueryRow(ctx, `select count(*) from subgroup`).Scan(&kept); err != nil || kept != 1 {
		t.Errorf("%d subgroups on record once there is room, %v", kept, err)
	}
	whole(t, r)
}
