package main

import (
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

// TestTheAccountIsReachedFromEverySurface, and can be used by everybody.
func TestTheAccountIsReachedFromEverySurface(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	b := browsertest.Start(t)
	for login, path := range map[string]string{"supervisor1": "/board", "engineer1": "/desk", "administrator1": "/admin/people", "operator1": "/station/" + r.Station.ID.String()} {
		p := r.signIn(t, b, login)
		p.Open(path)
		p.Click("[data-testid=account-link]")
		p.WaitFor(find("[data-testid=account]"))
		p.Want(login+": the way back", find("[data-testid=back]")+`.getAttribute("href").startsWith("`+path+`")`, "true")
		p.Accessible("account of " + login)
	}
	tablet, _ := r.tabletPage(t, b, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	badgeIn(tablet, "1001")
	for _, lang := range []string{"de", "es", "en"} {
		tablet.Open("/account?to=/station")
		tablet.Click(".account-page .language-switch button[value=" + lang + "]")
		tablet.WaitFor(`document.documentElement.lang === "` + lang + `" && ` + find("[data-testid=account]"))
		tablet.Accessible("account in " + lang)
		tablet.FitsWidth("account in "+lang, 320, 768, 1280)
		tablet.NothingOverflows("account in " + lang)
	}
	r.Clock.Advance(time.Minute)
	tablet.Fill("#pin-old", "999888")
	tablet.Fill("#pin-new", newPIN)
	tablet.Fill("#pin-again", newPIN)
	tablet.Click("[data-testid=pin-form] button")
	tablet.WaitFor(find("#pin-old-problem"))
	tablet.Accessible("a wrong PIN")
	tablet.Fill("#pin-old", pin)
	tablet.Fill("#pin-new", newPIN)
	tablet.Fill("#pin-again", newPIN)
	tablet.Click("[data-testid=pin-form] button")
	tablet.WaitFor(find("[data-testid=done]"))
	tablet.Accessible("a changed PIN")
	tablet.Click("[data-testid=back]")
	tablet.WaitFor(`location.pathname.startsWith("/station")`)
}
