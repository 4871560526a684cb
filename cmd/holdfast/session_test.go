package main

import (
	"testing"
	"time"

	"holdfast/internal/browsertest"
)

// TestASessionWarnsBeforeItEnds: who reads for hours is warned, goes on by one press, and
// at last loses nothing that was typed.
func TestASessionWarnsBeforeItEnds(t *testing.T) {
	t.Parallel()
	r := serve(t)
	b := browsertest.Start(t)
	p := r.signIn(t, b, "engineer1")
	p.Open("/desk/causes")
	p.WaitFor(find("[data-session-text]"))
	p.Want("fresh", find("[data-session-text]")+".hidden", "true")
	p.Fill("input[name=name]", "Nozzle bent")
	later := func(d time.Duration) {
		t.Helper()
		r.Clock.Advance(d)
		sleep(p, d)
	}

	for range 3 { // as often as somebody likes
		later(3*time.Hour + 55*time.Minute)
		p.WaitFor(`!` + find("[data-session-text]") + `.hidden`)
		p.Want("the warning takes no focus", `document.activeElement.closest("[data-session]")`, "null")
		p.Accessible("the warning before the session ends")
		p.FitsWidth("the warning before the session ends", 320, 1280)
		p.Size(1280, 800)
		p.Click("[data-session-stay]")
		p.WaitFor(find("[data-session-text]") + `.hidden`)
	}
	if res := p.Value(`(await fetch("/desk/causes")).status`); res != "200" {
		t.Error("the session has ended although somebody asked to stay")
	}

	later(4*time.Hour + time.Minute)
	p.WaitFor(`!` + find("[data-session-in]") + `.hidden`)
	p.Want("it cannot be put off any more", find("[data-session-stay]")+".hidden", "true")
	p.Accessible("a session that has ended")
	p.Want("what was typed", find("input[name=name]")+".value", "Nozzle bent")
	p.Want("the server has ended it too", `(await fetch("/desk/causes")).status`, "401")

	// Another window signs in; this one goes on with what was typed.
	p.Want("signing in elsewhere", `(await fetch("/sign-in", { method: "POST", body: new URLSearchParams({ login: "engineer1", password: "`+secret+`" }) })).ok`, "true")
	p.Value(`localStorage.setItem("holdfast.session.ends", Date.now() + 3600000)`) // as the page does that is loaded there
	p.WaitFor(find("[data-session-text]") + `.hidden`)
	p.Click("input[name=name] ~ button, form:has(input[name=name]) button[type=submit]")
	p.WaitFor(`[...document.querySelectorAll("[name=name]")].some((field) => field.defaultValue === "Nozzle bent")`)
}
