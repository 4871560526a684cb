package station_test

import (
	"net/http"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store/storetest"
)

func TestRoundIsSavedOnceAndAnswered(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	working := b.get(s.at()).is(http.StatusOK).says("Due now", "Axle seat diameter", `data-testid="round"`)
	form := working.round(s.Diameter, "14.991", "14,990", "14.992", "14.989", "14.993")
	mass := s.Mass.ID.String()
	form.Add("characteristic", mass)
	form.Set("setup-"+mass, "1")
	form.Set("reading-"+mass, "1.21")
	first := b.post(s.at("round"), form).is(http.StatusSeeOther)
	if want := s.at("round", form.Get("round")); first.to != want {
		t.Fatalf("leads to %s, want %s", first.to, want)
	}
	s.Clock.Advance(2 * time.Second)
	if again := b.post(s.at("round"), form).is(http.StatusSeeOther); again.to != first.to {
		t.Errorf("the second tap leads to %s", again.to)
	}
	b.get(first.to).is(http.StatusOK).says("Learning", "1 of 20 subgroups collected", "14.9910", "Grease mass")
	form.Set("reading-"+mass, "1.22")
	b.post(s.at("round"), form).is(http.StatusConflict).says("set aside", "1.22", "14,990")
	if n := s.rounds(t); n != 2 {
		t.Fatalf("%d subgroups are on record", n)
	}
	if got := b.get(s.at()).is(http.StatusOK); strings.Contains(got.body, `data-testid="round"`) {
		t.Error("the round is still asked for")
	}
}

// TestTheMachineIsNamedWhereThereAreSeveral: a characteristic of the same name on both
// machines of a station is told apart wherever it stands.
func TestTheMachineIsNamedWhereThereAreSeveral(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	twin := plant.Characteristic{ID: uuid.Must(uuid.NewV7()), StationID: s.Station.ID, MachineID: s.Second.ID, Name: s.Diameter.Name}
	setup := plant.Setup{Unit: "mm", Decimals: 3, Target: storetest.Decimal(t, "14.991"), Lower: storetest.Decimal(t, "14.982"), Upper: storetest.Decimal(t, "15.000"),
		Chart: limits.Individuals, Size: 1, Plan: plant.SamplingPlan{EveryMinutes: 30}}
	if err := s.AddCharacteristic(t.Context(), twin, setup, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	one, two := "Axle seat diameter (Lathe 1)", "Axle seat diameter (Lathe 2)"
	working := b.get(s.at()).is(http.StatusOK).says("<b>"+one+"</b>", "<b>"+two+"</b>", one+", mm", two+", mm")
	answer := b.post(s.at("round"), working.round(twin, "15.007")).is(http.StatusSeeOther)
	b.get(answer.to).is(http.StatusOK).says(two + ": part 1 is outside specification")
	b.get(s.at()).is(http.StatusOK).says("<b>" + two + "</b>") // it is open now
	b.get("/station/" + s.Other.ID.String()).is(http.StatusOK).says("<b>Shoulder length</b>").saysNot("(Lathe 3)")
}
