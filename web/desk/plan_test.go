package desk_test

import (
	"net/http"
	"net/url"
	"strings"
	"testing"

	"holdfast/internal/plant"
)

func planForm(kind plant.MatterKind, do, version string, says ...string) url.Values {
	form := url.Values{"kind": {string(kind)}, "family": {"turning"}, "version": {version}, "do": {do}}
	for _, s := range says {
		form["says"] = append(form["says"], s)
		form["answer"] = append(form["answer"], "done")
		for _, name := range []string{"lower", "upper", "unit", "if-not"} {
			form[name] = append(form[name], "")
		}
	}
	return form
}

func TestAPlanIsWrittenShownAndKeptInVersions(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b, reader := s.signIn(t, s.Engineer), s.signIn(t, s.Supervisor)
	at := "/desk/plan?family=turning&kind=location+up"
	b.get(at).is(http.StatusOK).has("Reaction plan: Location up", "Family: turning", "No plan is in force here.", "Save as version 1")
	form := planForm(plant.MatterUp, "add", "0", "Stop the machine.")
	b.post("/desk/plan", form).is(http.StatusOK).has("Step 2", "Stop the machine.", "the steps of their plans add up").hasNot("Step 1 of 2")
	form = planForm(plant.MatterUp, "down-1", "0", "First.", "Second.")
	if body := b.post("/desk/plan", form).is(http.StatusOK).body; strings.Index(body, "Second.") > strings.Index(body, "First.") {
		t.Error("the step was not moved down")
	}
	form.Set("do", "remove-2")
	b.post("/desk/plan", form).is(http.StatusOK).hasNot("Second.")
	form.Set("do", "save")
	form["answer"][1], form["lower"][1] = "value", "much"
	b.post("/desk/plan", form).is(http.StatusUnprocessableEntity).has("The limits of step 2 are not numbers.", `value="much"`)
	form["lower"][1] = ""
	b.post("/desk/plan", form).is(http.StatusUnprocessableEntity).has("needs a lower or an upper limit")
	form["lower"][1], form["upper"][1], form["unit"][1], form["if-not"][1] = "17", "19,5", "bar", "Set it to 18."
	form.Set("verify", "1")
	to := b.post("/desk/plan", form).is(http.StatusSeeOther).to
	b.get(to).is(http.StatusOK).has("Version 1 is in force", "17 to 19.5\u00a0bar", "Outside: Set it to 18.", "A second person verifies it.", "Save as version 2")
	b.post("/desk/plan", form).is(http.StatusConflict).has("Somebody has changed this plan meanwhile.", "First.", "Save as version 2")
	own := "/desk/plan?kind=location+up&characteristic=" + s.Diameter.ID.String()
	b.get(own).has("Nothing of its own. In force is the plan of: Family: turning.", "First.", "Save as version 1")
	b.get("/desk/plans").is(http.StatusOK).has("2 steps, second person", "The plant")
	reader.get(at).is(http.StatusOK).has("First.").hasNot(`data-testid="plan-form"`)
	reader.post("/desk/plan", form).is(http.StatusForbidden)
	withdraw := planForm(plant.MatterUp, "withdraw", "1", "x")
	b.get(b.post("/desk/plan", withdraw).is(http.StatusSeeOther).to).has("Withdrawn. The next wider plan counts from now on.", "No plan is in force here.")
	for _, bad := range []string{"/desk/plan", "/desk/plan?kind=weather", "/desk/plan?kind=dispersion&family=weaving", "/desk/plan?kind=dispersion&characteristic=1"} {
		b.get(bad).is(http.StatusNotFound)
	}
}

func TestCausesAreKeptInACatalogue(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	b.get("/desk/causes").is(http.StatusOK).has("Insert chipped", "Family: turning", "All stations")
	b.post("/desk/causes", url.Values{"do": {"add"}, "family": {"turning"}, "name": {"Coolant low"}}).is(http.StatusSeeOther)
	b.post("/desk/causes", url.Values{"do": {"add"}, "family": {"turning"}, "name": {"Coolant low"}}).is(http.StatusConflict).has("There is a cause of this name already.", `value="Coolant low"`)
	b.post("/desk/causes", url.Values{"do": {"add"}, "family": {"turning"}}).is(http.StatusUnprocessableEntity).has("A cause needs a name.")
	all, err := s.AllCauses(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	id := ""
	for _, c := range all {
		if c.Name == "Coolant low" {
			id = c.ID.String()
		}
	}
	b.post("/desk/causes", url.Values{"do": {"rename"}, "id": {id}, "name": {"Coolant thin"}}).is(http.StatusSeeOther)
	b.post("/desk/causes", url.Values{"do": {"retire"}, "id": {id}}).is(http.StatusSeeOther)
	b.get("/desk/causes?saved=1").has("Coolant thin", "retired", "Offer again", "The catalogue is changed.")
	b.post("/desk/causes", url.Values{"do": {"restore"}, "id": {id}}).is(http.StatusSeeOther)
	s.signIn(t, s.Supervisor).get("/desk/causes").is(http.StatusOK).has("Coolant thin").hasNot("Offer again", `name="do"`)
}
