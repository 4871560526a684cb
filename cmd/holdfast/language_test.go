package main

import (
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// TestAGermanTabletIsPushedGerman: two people at one station, each hears it in their own
// language, and what a page shows at first is what is pushed to it later.
func TestAGermanTabletIsPushedGerman(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 2)
	german, english := r.visit(t, "operator1"), r.visit(t, "supervisor1")
	if res, body := german.post("/language", url.Values{"language": {"de"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("%s\n%s", res.Status, body)
	}
	station := "/station/" + r.Station.ID.String()
	_, page := german.get(station)
	topic := ui.TopicStation(r.Station.ID)
	if want := "/live?topic=" + url.QueryEscape(topic+"@de"); !strings.Contains(page, want) || !strings.Contains(page, `lang="de"`) {
		t.Fatalf("the German page does not watch %s", want)
	}
	de, en := german.dial(topic+"@de"), english.dial(topic)
	hears(t, de, 30*time.Second, "Letzte Runde berichtigen")
	hears(t, en, 30*time.Second, "Correct the last round")
	r.Clock.Advance(time.Minute)
	m := r.Machine.ID
	stop := plant.MachineState{ID: m, Machine: m, Part: r.PartA.ID, Person: r.Operator.ID, At: r.Clock.Now()}
	if err := r.program.store.SetMachine(t.Context(), stop); err != nil {
		t.Fatal(err)
	}
	hears(t, de, 30*time.Second, "Steht seit")
	hears(t, en, 30*time.Second, "Stands still since")
}

// TestNobodysLanguageIsNotRendered: a change marks a station in every language, and what
// is rendered is what is watched.
func TestNobodysLanguageIsNotRendered(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := newViews(r.program.store, &r.program.plant, r.Clock.Now)
	topic := ui.TopicStation(r.Station.ID)
	marked := strings.Join(v.changed([]plantID{r.Station.ID}), " ")
	for _, want := range []string{topic + "@de", topic + "@es", ui.TopicBoard} {
		if !strings.Contains(marked, want) {
			t.Errorf("%s is not marked: %s", want, marked)
		}
	}
	got, err := v.render(t.Context(), []string{topic + "@de", topic + "@xx"})
	if err != nil {
		t.Fatal(err)
	}
	if len(got) != 1 || len(got[topic+"@de"]) == 0 || !strings.Contains(string(got[topic+"@de"][0].HTML), "Fällig") {
		t.Errorf("rendered %v", got)
	}
}
