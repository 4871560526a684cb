package main

import (
	"testing"
	"time"

	"holdfast/internal/browsertest"
)

// TestASupervisorIsCalledOnWhateverPageIsOpen: nobody takes a matter; a supervisor who
// reads a chart hears of it there, keeps it quiet, and everybody sees until when.
func TestASupervisorIsCalledOnWhateverPageIsOpen(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	r.MustRecord(t, r.Diameter, 14998, 14999, 14998, 14999, 14998)
	m := r.openMatter(t)
	b := browsertest.Start(t)

	engineer := r.signIn(t, b, "engineer1")
	engineer.Open("/board")
	engineer.Want("an engineer is not called", `document.querySelector("#calls-link")`, "null")

	supervisor := r.signIn(t, b, "supervisor1")
	supervisor.Open("/desk/characteristic/" + r.Diameter.ID.String() + "/revisions") // a page that shows nothing live of its own
	supervisor.WaitFor(`document.querySelector("#calls-link").textContent.includes("Calls: ")`)
	supervisor.Value(`window.same = true`) // a reload would forget it
	supervisor.Want("not called yet", `document.querySelector("#calls-notice").textContent.includes("Turning 1, Look")`, "false")
	r.Clock.Advance(21 * time.Minute)
	supervisor.WaitFor(`document.querySelector("#calls-notice").textContent.includes("Turning 1, Look")`)
	supervisor.Want("a screen reader is told", `document.querySelector("#calls-say").textContent.includes("Turning 1, Look")`, "true")
	supervisor.Want("the page was not reloaded", "window.same", "true")
	supervisor.Accessible("a page with a notice")
	supervisor.FitsWidth("a page with a notice", 320, 1280)

	supervisor.Click("#calls-link")
	supervisor.WaitFor(`document.querySelector("[data-testid=open]")`)
	supervisor.WaitFor(`document.querySelector("#calls-link").textContent.includes("Calls: ")`)
	supervisor.WaitFor(`document.querySelector("#calls-link").textContent.match(/\d+/)[0] === document.querySelector("#open-title").textContent.match(/\d+/)[0]`)
	supervisor.Want("the number is that of the list", `String(document.querySelectorAll("[data-testid=open] .calls-open > li").length === Number(document.querySelector("#open-title").textContent.match(/\d+/)[0]))`, "true")
	supervisor.Accessible("the list of calls")
	supervisor.FitsWidth("the list of calls", 320, 1280)
	supervisor.Want("who was called", `document.querySelector("[data-testid=sent]").textContent.includes("on supervisors' pages")`, "true")
	quiet := `/calls/quiet/` + m.ID.String()
	supervisor.Click(`a[href="` + quiet + `"]`)
	supervisor.WaitFor(`document.querySelector("[data-testid=quiet-form]")`)
	supervisor.Accessible("keeping a matter quiet")
	supervisor.FitsWidth("keeping a matter quiet", 320, 1280)
	supervisor.Click("[data-testid=quiet-form] button[type=submit]") // nothing is filled in
	supervisor.WaitFor(`document.querySelector("[data-testid=quiet-form] .problem")`)
	supervisor.Accessible("a form that lacks something")
	supervisor.Value(`document.querySelector("input[name=until]").click()`)
	supervisor.Fill("#reason", "Insert is on its way from the store")
	supervisor.Click("[data-testid=quiet-form] button[type=submit]")
	supervisor.WaitFor(`location.pathname === "/calls" && document.querySelector("[data-testid=kept-quiet]")?.textContent.includes("Quiet until")`)
	supervisor.WaitFor(`!document.querySelector("#calls-notice").textContent.includes("Turning 1, Look")`)
	engineer.WaitFor(needs + `.includes("Insert is on its way from the store")`)

	engineer.Open("/board/alarms")
	engineer.WaitFor(`document.querySelector("table.load")`)
	engineer.Accessible("alarm load")
	engineer.FitsWidth("alarm load", 320, 1280)

	administrator := r.signIn(t, b, "administrator1")
	administrator.Open("/admin/messages")
	administrator.WaitFor(`document.querySelector("[data-testid=targets]")`)
	administrator.Accessible("messages")
	administrator.FitsWidth("messages", 320, 1280)
}
