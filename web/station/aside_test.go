package station_test

import (
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// gauged gives the diameter a gauge that is checked every week.
func (s *site) gauged(t testing.TB) plant.Gauge {
	t.Helper()
	ctx := t.Context()
	g := plant.Gauge{ID: storetest.ID(), Name: "Micrometer M-04", CheckDays: 7}
	if err := s.AddGauge(ctx, g, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	h, err := s.History(ctx, s.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	setup := h.State.Setup
	setup.GaugeID = g.ID
	if err := s.ChangeSetup(ctx, s.Diameter.ID, setup, setup.Version, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	return g
}

// TestOperatorIsToldWhatToKeepAside: on the verdict, in the column and on the matter, for
// a look as well; what was put aside is stated by a person and never filled in.
func TestOperatorIsToldWhatToKeepAside(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	if err := s.SetMachine(t.Context(), plant.MachineState{ID: storetest.ID(), Machine: s.Machine.ID, Running: true}); err != nil {
		t.Fatal(err)
	}
	s.steady(t)
	b := s.signIn(t, s.Operator)
	last := s.Clock.Now().Add(-30 * time.Minute) // the round before
	look := s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	told := "Keep aside what was made since " + last.Format("15:04") + ", about 60 parts."
	grown := "Keep aside what was made since " + last.Format("15:04") + ", about 80 parts."
	b.get(s.at("round", look.Round.String())).is(http.StatusOK).says("Look for a cause", told, "It grows until", "A steady chart is not a release")
	s.Clock.Advance(10 * time.Minute)
	b.get(s.at()).is(http.StatusOK).says(grown)
	matter := s.at("matter", look.Parts[0].Matter.String())
	b.get(matter).is(http.StatusOK).says(grown, "Nobody has stated yet what was put aside.", matter+"/aside")

	form := b.get(matter+"/aside").is(http.StatusOK).says(grown, "Count them", "A steady chart is not a release")
	fields := url.Values{"id": {form.field("id")}, "quantity": {"some"}, "place": {"Red rack 3"}, "tag": {"R-17"}}
	b.post(matter+"/aside", fields).is(http.StatusUnprocessableEntity).says("Type how many parts, in whole numbers.", "Red rack 3")
	fields.Set("quantity", "0")
	b.post(matter+"/aside", fields).is(http.StatusUnprocessableEntity).says("Say how many parts were put aside.")
	fields.Set("quantity", "78")
	for range 2 { // a double tap is one statement
		if got := b.post(matter+"/aside", fields).is(http.StatusSeeOther); got.to != matter {
			t.Errorf("it leads to %s", got.to)
		}
	}
	b.get(matter).says("78 parts are kept aside.", "Put more aside")
	b.get(s.at()).says(grown + " 78 parts are kept aside.")
	b.get(matter+"/aside").says("Put aside: 78", "Red rack 3, tag R-17", "Operator 1")

	// By the closing many more were made than were put aside: where they are is asked once,
	// and "not known" is an answer.
	b.get(matter).saysNot(`data-testid="rest"`) // 78 of about 80 are all
	s.Clock.Advance(60 * time.Minute)
	asks := "About 200 parts are suspect, 78 put aside: where is the rest?"
	closing := url.Values{"version": {b.get(matter).says(asks).field("version")}, "cause": {"none"}, "done": {"nothing"}}
	b.post(matter+"/close", closing).is(http.StatusUnprocessableEntity).says(asks, "Say where the rest is.")
	closing.Set("rest", "gone")
	closing.Set("rest_note", "washing line")
	closing.Set("cause", "")
	b.post(matter+"/close", closing).is(http.StatusUnprocessableEntity).says(asks, "washing line").saysNot("Say where the rest is.")
	closing.Set("cause", "none")
	if got := b.post(matter+"/close", closing).is(http.StatusSeeOther); got.to != matter {
		t.Errorf("with parts that went on it leads to %s", got.to)
	}

	// The matter is closed, the product stays in the column.
	rest := "Not put aside, already gone on: 122 (washing line)"
	b.get(matter).says("Closed", "78 parts are kept aside.", rest, "122 parts are not contained: they have gone on. Tell your supervisor now.")
	b.get(matter+"/aside").says("Not put aside, already gone on: 122", "washing line")
	b.get(s.at()).says("Kept aside: 78 parts", matter+"/aside", rest).saysNot("Keep aside what was made")
	if _, err := s.VerifyLedger(t.Context()); err != nil {
		t.Errorf("the record: %v", err)
	}
}

// TestNothingPutAsideWaitsForAPerson: where everything suspect has gone on the closing is
// not held up, and what became of the product is still to be said.
func TestNothingPutAsideWaitsForAPerson(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	if err := s.SetMachine(t.Context(), plant.MachineState{ID: storetest.ID(), Machine: s.Machine.ID, Running: true}); err != nil {
		t.Fatal(err)
	}
	matter := s.open(t)
	b := s.signIn(t, s.Operator)
	page := b.get(matter).says("About 80 parts are suspect, none put aside: where are they?")
	b.post(matter+"/close", url.Values{"version": {page.field("version")}, "cause": {"none"}, "done": {"nothing"}, "rest": {"unknown"}}).is(http.StatusSeeOther)
	b.get(matter).says("Closed", "Nothing was put aside.", "Not put aside, not known where: 80", "State what was put aside")
	b.get(s.at()).says("Product in doubt", "Not put aside, not known where: 80")
	if _, err := s.VerifyLedger(t.Context()); err != nil {
		t.Errorf("the record: %v", err)
	}
}

// TestGaugeCheck: overdue it waits in the column; failed it holds the product, and rounds
// taken with it say so until it is good again.
func TestGaugeCheck(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	g := s.gauged(t)
	b := s.signIn(t, s.Operator)
	b.get(s.at("gauges")).is(http.StatusOK).says("Micrometer M-04", "No check on record", "Axle seat diameter")
	at := s.at("gauge", g.ID.String())
	reading := "15.001"
	check := func(result, note string) page {
		t.Helper()
		return b.post(at, url.Values{"id": {b.get(at).is(http.StatusOK).field("id")}, "result": {result}, "master": {"15,000"}, "reading": {reading}, "note": {note}})
	}
	check("", "").is(http.StatusUnprocessableEntity).says("Say whether the gauge is good.", "15,000")
	if got := check("good", "").is(http.StatusSeeOther); !strings.HasSuffix(got.to, "/gauges?checked=good") {
		t.Errorf("it leads to %s", got.to)
	}
	good := s.Clock.Now()
	b.get(s.at("gauges")).says("Good, next check " + itoa(int64(good.AddDate(0, 0, 7).Day())) + " March 2026")
	b.get(s.at()).says("Gauge checks</a>").saysNot("1 waits")
	s.Clock.Advance(8 * 24 * time.Hour)
	b = s.signIn(t, s.Operator)
	b.get(s.at()).says("Gauge checks: 1 waits", "Check Micrometer M-04", at) // a task like a round
	b.get(s.at("gauges")).says("Check overdue since")
	adjust := s.at("change", s.Diameter.ID.String())
	b.get(adjust).says("The check of Micrometer M-04 is overdue since", "check the gauge first", `data-testid="to-check"`, "The numbers say: leave it alone")

	master := url.Values{"id": {b.get(at).field("id")}, "result": {"failed"}, "master": {"15,000"}}
	b.post(at, master).is(http.StatusUnprocessableEntity).says("Say what was wrong with the gauge, or type both numbers.", "Worn or damaged")
	check("failed", "").is(http.StatusSeeOther) // both numbers say it
	b.post(at, with(with(master, "why", "worn"), "note", "anvil")).is(http.StatusSeeOther)
	turn := b.get(adjust).says("Do not adjust on these numbers", "its numbers do not say where the level is", "recorded as unprompted").saysNot("a single part", "recorded as prompted", "is overdue")
	b.post(s.at("change"), url.Values{"id": {turn.field("id")}, "machine": {turn.field("machine")}, "kind": {"adjustment"}, "characteristic": {s.Diameter.ID.String()},
		"knob": {turn.field("knob")}, "direction": {"down"}, "size": {"0.001"}}).is(http.StatusSeeOther)
	if list := s.changes(t); len(list) != 1 || list[0].Prompted {
		t.Errorf("with a failed gauge alone: %+v", list)
	}
	b.get(s.at("gauges")+"?checked=failed").says("The failed check is on record.", "Failed at", "not good since")
	doubt := "Micrometer M-04 failed its check at"
	b.get(s.at()).says("Hold", "Keep aside what was made since")
	b.get(s.at()+"?measure="+s.Diameter.ID.String()).says(doubt, "What it says is in doubt.")
	r := s.Round(s.Diameter, 14990, 14991, 14992, 14989, 14993)
	r.Entries[0].SetupVersion = 2
	a, err := s.Record(t.Context(), r)
	if err != nil {
		t.Fatal(err)
	}
	b.get(s.at("round", a.Round.String())).says("Hold the product", doubt, "its gauge failed the check.", "was the last good check of the gauge.")
	b.get(s.at("matter", a.Parts[0].Matter.String())).says("its gauge failed the check")
	s.Clock.Advance(time.Minute)
	check("good", "new anvil").is(http.StatusSeeOther)
	b.get(s.at() + "?measure=" + s.Diameter.ID.String()).saysNot(doubt)
	b.get(at).says("new anvil", "Worn or damaged: anvil", "15.001 on a master of 15.000")
	b.get(s.at("gauge", s.Machine.ID.String())).is(http.StatusNotFound)
}

// TestGaugeThatIsOffIsAskedAbout: called good and far from its master, it is recorded only
// when somebody confirms it for these very values; failed is never asked about.
func TestGaugeThatIsOffIsAskedAbout(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	g := s.gauged(t)
	b := s.signIn(t, s.Operator)
	at := s.at("gauge", g.ID.String())
	form := url.Values{"id": {b.get(at).field("id")}, "result": {"good"}, "master": {"15,000"}, "reading": {"15.020"}}
	asked := b.post(at, form).is(http.StatusUnprocessableEntity).says("The gauge is off by 0.020.", "0.018", "It is good all the same", `value="15.020"`)
	b.get(at).says("None yet.").saysNot("It is good all the same")
	yes := asked.field("good-as")
	form.Set("reading", "15.030")
	form.Set("good-as", yes)
	b.post(at, form).is(http.StatusUnprocessableEntity).says("The gauge is off by 0.030.")
	form.Set("reading", "15.020")
	b.post(at, form).is(http.StatusSeeOther)
	b.get(at).says("15.020 on a master of 15.000")
	b.post(at, url.Values{"id": {b.get(at).field("id")}, "result": {"failed"}, "master": {"15,000"}, "reading": {"15.020"}, "note": {"anvil worn"}}).is(http.StatusSeeOther)
}
