package desk_test

import (
	"net/http"
	"net/url"
	"regexp"
	"testing"

	"holdfast/internal/plant"
)

var hiddenID = regexp.MustCompile(`name="id" value="([^"]+)"`)

// settingsForm is the form as the page gives it out.
func settingsForm(t *testing.T, body string, replaces string) url.Values {
	t.Helper()
	m := hiddenID.FindStringSubmatch(body)
	if m == nil {
		t.Fatal("the page holds no id for the change")
	}
	form := url.Values{"id": {m[1]}, "replaces": {replaces}, "reason": {"the customer asks for it"}}
	for key, text := range plant.DefaultSettings().Content() {
		form.Set(key, text)
	}
	return form
}

func TestSettingsAreSeenAndChanged(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	page := b.get("/desk/settings").is(http.StatusOK).has("Capable from Ppk", "default 1.33", "Nothing was ever changed", `value="1.33"`)
	if n := page.count(`data-testid="setting"`); n != len(plant.AllSettings()) {
		t.Errorf("%d settings on the page, want %d", n, len(plant.AllSettings()))
	}
	form := settingsForm(t, page.body, "0")

	bad := url.Values{}
	for k, v := range form {
		bad[k] = v
	}
	bad.Set("owner.capable", "9")
	bad.Set("owner.window", "many")
	b.post("/desk/settings", bad).is(http.StatusUnprocessableEntity).
		has("Type a number from 0.50 to 5.00.", "This is not a number.", `value="many"`, "the customer asks for it")
	bad = url.Values{}
	for k, v := range form {
		bad[k] = v
	}
	bad.Set("reason", "")
	b.post("/desk/settings", bad).is(http.StatusUnprocessableEntity).has("Say why it is changed.")

	form.Set("owner.capable", "1,67")
	if p := b.post("/desk/settings", form).is(http.StatusSeeOther); p.to != "/desk/settings?saved=1" {
		t.Errorf("led to %q", p.to)
	}
	b.post("/desk/settings", form).is(http.StatusSeeOther) // sent again
	b.get("/desk/settings?saved=1").is(http.StatusOK).has("Settings 1 hold from now on.", "Capable from Ppk: from 1.33 to 1.67", "Engineer 1", `value="1.67"`)

	stale := settingsForm(t, page.body, "0")
	stale.Set("id", "0190b3a4-0000-7000-8000-000000000001")
	b.post("/desk/settings", stale).is(http.StatusConflict).has("Somebody has changed the settings meanwhile", `name="replaces" value="1"`, "the customer asks for it")

	sup := s.signIn(t, s.Supervisor)
	sup.get("/desk/settings").is(http.StatusOK).has("An engineer can change these.").hasNot(`data-testid="save"`)
	sup.post("/desk/settings", form).is(http.StatusForbidden)
}
