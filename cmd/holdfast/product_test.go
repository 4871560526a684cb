package main

import (
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestProductIsKeptAsideAndReleased: the operator gets the instruction with the verdict
// and states what was put aside; the supervisor says what became of it.
func TestProductIsKeptAsideAndReleased(t *testing.T) {
	t.Parallel()
	r := serve(t)
	if err := r.SetMachine(t.Context(), plant.MachineState{ID: storetest.ID(), Machine: r.Machine.ID, Running: true}); err != nil {
		t.Fatal(err)
	}
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	a := r.MustRecord(t, r.Diameter, 14998, 14999, 14998, 14999, 14998)
	r.Clock.Advance(5 * time.Minute)
	browser := browsertest.Start(t)

	tablet := r.signIn(t, browser, "operator1")
	station := "/station/" + r.Station.ID.String()
	tablet.Size(1280, 800)
	tablet.Open(station + "/round/" + a.Round.String())
	const instruction = `document.querySelector("[data-testid=aside] strong").textContent`
	tablet.Want("the instruction with the verdict", instruction+`.replace(/since \S+,/, "since then,")`, "Keep aside what was made since then, about 70 parts.")
	tablet.Accessible("the verdict with its instruction")
	tablet.Open(station + "/matter/" + a.Parts[0].Matter.String())
	tablet.Click("[data-testid=state-aside]")
	tablet.WaitFor(`document.querySelector("[data-testid=aside-page]")`)
	tablet.Accessible("stating what was put aside")
	tablet.FitsWidth("stating what was put aside", 1280, 800, 360)
	tablet.Fill("input[name=quantity]", "68")
	tablet.Fill("input[name=place]", "Red rack 3")
	tablet.Fill("input[name=tag]", "R-17")
	tablet.Click("[data-testid=keep-aside]")
	tablet.WaitFor(`document.querySelector("[data-testid=aside-state]")`)
	tablet.Want("what is on record", `document.querySelector("[data-testid=aside-state]").textContent.trim()`, "68 parts are kept aside.")
	tablet.Accessible("the matter with what was put aside")

	desk := r.signIn(t, browser, "supervisor1")
	desk.Size(1440, 900)
	desk.Open("/desk/product")
	desk.Accessible("the list of product")
	desk.Click("[data-testid=product] a")
	desk.WaitFor(`document.querySelector("[data-testid=decide]")`)
	desk.Accessible("deciding about product")
	desk.FitsWidth("deciding about product", 1440, 768, 360)
	desk.Click("#f-step-released")
	desk.Fill("#f-decide-quantity", "68")
	desk.Fill("#f-decide-note", "each measured on the second gauge")
	desk.Fill("#f-decide-secret", secret)
	desk.Click("[data-testid=decide-button]")
	desk.WaitFor(`document.querySelector("[data-testid=stated]")`)
	desk.Want("nothing is left", `document.querySelector("[data-testid=left]").textContent`, "What became of the product is stated.")
	c, err := r.Containment(t.Context(), a.Parts[0].Matter)
	if err != nil || c.Left() != 0 || c.Disposed() != 68 || c.Entries[1].PersonName != "Supervisor 1" {
		t.Errorf("on record: %+v, %v", c, err)
	}
}
