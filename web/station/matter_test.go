package station_test

import (
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
)

// steady gives the fixture frozen limits for the diameter.
func (s *site) steady(t testing.TB) {
	t.Helper()
	for i := range int64(25) {
		s.Clock.Advance(30 * time.Minute)
		d := i % 3
		s.MustRecord(t, s.Diameter, 14990+d, 14991, 14992-d, 14989+d, 14993)
	}
	s.MustFreeze(t, s.Diameter)
	s.Clock.Advance(30 * time.Minute)
}

func TestVerdictSaysWhatToDo(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	b := s.signIn(t, s.Operator)
	leave := s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14989, 14993)
	b.get(s.at("round", leave.Round.String())).is(http.StatusOK).
		says("Leave it alone", "The process is steady. Do not adjust.", "14.9910").saysNot(`data-testid="take"`, `data-testid="caution"`)
	s.Clock.Advance(30 * time.Minute)
	above := s.MustRecord(t, s.Diameter, 14990, 14991, 14993, 14990, 14993)
	b.get(s.at("round", above.Round.String())).says("Leave it alone", "14.9914").saysNot("above target", "On target.") // no invitation to adjust

	s.Clock.Advance(30 * time.Minute)
	look := s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	said := b.get(s.at("round", look.Round.String())).is(http.StatusOK)
	said.says("Look for a cause", "Axle seat diameter (Lathe 1): beyond 3 sigma, high side.", "Look for what changed.", `data-testid="take"`, "0.0060\u00a0mm above target.")

	s.Clock.Advance(30 * time.Minute)
	quiet := s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14989, 14993)
	b.get(s.at("round", quiet.Round.String())).says("Look for a cause", "still open since", `data-testid="take"`)

	s.Clock.Advance(30 * time.Minute)
	good := s.Clock.Now()
	s.MustRecord(t, s.Force, 610, 612, 608, 611, 609, 613)
	s.Clock.Advance(30 * time.Minute)
	s.MustRecord(t, s.Force, 610, 612, 681, 611, 609, 613)
	s.Clock.Advance(30 * time.Minute)
	hold := s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	b.get(s.at("round", hold.Round.String())).is(http.StatusOK).says("Hold the product",
		"part 3 is outside specification, 6.91\u00a0kN; the upper limit is 6.80\u00a0kN",
		"Keep aside what was made since "+good.Format("15:04"), "every reading within specification", "A steady chart is not a release")
	// The matter names the same part, its value and the limit, whenever it is looked at.
	b.get(s.at("matter", hold.Parts[0].Matter.String())).is(http.StatusOK).says("Part 3: 6.81\u00a0kN, upper limit 6.80\u00a0kN", s.Clock.Now().Format("15:04")+", Part 3: 6.91\u00a0kN, upper limit 6.80\u00a0kN")
}

// open makes a matter and returns its address.
func (s *site) open(t testing.TB) string {
	t.Helper()
	s.steady(t)
	a := s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	s.Clock.Advance(10 * time.Minute)
	return s.at("matter", a.Parts[0].Matter.String())
}

func TestMatterIsTakenAndClosedWithCauseAndAction(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	at := s.open(t)
	b, other := s.signIn(t, s.Operator), s.signIn(t, s.Supervisor)
	b.get(s.at()).says("Nobody has taken it yet", at)
	page := b.get(at).is(http.StatusOK).says("beyond 3 sigma, high side", "Insert chipped", "Something else")
	version := page.field("version")

	b.post(at+"/take", url.Values{"version": {version}}).is(http.StatusSeeOther)
	b.post(at+"/take", url.Values{"version": {version}}).is(http.StatusSeeOther) // a double tap
	b.get(s.at()).says("Operator 1 has taken it")
	other.post(at+"/take", url.Values{"version": {version}}).is(http.StatusConflict).says("Operator 1 was quicker and took this", "nothing of yours was recorded")

	other.get(at).says("Take it over")
	version = b.get(at).saysNot("Take it over", `data-testid="take"`).field("version") // it is Operator 1's already
	opened := s.Clock.Now().Add(-10 * time.Minute)
	for _, tc := range []struct {
		name string
		form url.Values
		says []string
	}{
		{"nothing", url.Values{}, []string{"Say what the cause was.", "Say what was done, or that nothing was done."}},
		{"own words left out", url.Values{"cause": {"own"}, "done": {"nothing"}}, []string{"Say in your own words"}},
		{"a cause that there is not", url.Values{"cause": {version}, "done": {"nothing"}}, []string{"There is no such cause."}},
		{"both", url.Values{"cause": {"none"}, "action": {"new insert"}, "done": {"nothing"}}, []string{"Either nothing was done", `value="new insert"`}},
		{"fixed before the signal", fixed(opened.Add(-time.Hour)), []string{"cannot lie before the signal", `value="new insert"`}},
		{"minutes ago, before the signal", url.Values{"cause": {"none"}, "action": {"new insert"}, "fixed": {"30"}}, []string{"cannot lie before the signal"}},
		{"no such choice of a time", url.Values{"cause": {"none"}, "action": {"new insert"}, "fixed": {"7"}}, []string{"This is not a time."}},
		{"fixed in the future", fixed(s.Clock.Now().Add(time.Hour)), []string{"cannot lie in the future"}},
		{"fixed at no time", url.Values{"cause": {"none"}, "action": {"new insert"}, "fixed": {"other"}, "fixed_day": {"2026-03-02"}, "fixed_time": {"noon"}}, []string{"This is not a time."}},
		{"too many words", url.Values{"cause": {"own"}, "own": {strings.Repeat("x", 201)}, "done": {"nothing"}}, []string{"at most 200 characters"}},
	} {
		tc.form.Set("version", version)
		t.Log(tc.name)
		b.post(at+"/close", tc.form).is(http.StatusUnprocessableEntity).says(tc.says...)
	}
	b.get(at).says("Now</span>", "10 min ago", "Another time", `name="fixed_time"`).saysNot("30 min ago", "datetime-local")
	form := fixed(opened)
	form.Set("version", version)
	b.post(at+"/close", form).is(http.StatusSeeOther)
	b.get(at).is(http.StatusOK).says("Closed", "something loose", "new insert", "The chart starts afresh at").saysNot(`data-testid="close-form"`)
	other.post(at+"/close", form).is(http.StatusConflict).says("Operator 1 was quicker and closed this")
	b.get(s.at()).says("Nothing is open.")

	c, err := s.StationState(t.Context(), s.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, one := range c.Characteristics {
		if one.ID == s.Diameter.ID && !one.Segment.From.After(opened) {
			t.Errorf("the chart starts afresh at %v, not after %v", one.Segment.From, opened)
		}
	}
}

// TestRefusedClosingIsBroughtIntoView: the form stands below what was measured, so that a
// refusal at the top of the page would look as if nothing had happened.
func TestRefusedClosingIsBroughtIntoView(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	at := s.open(t)
	tb := s.tablet(t)
	tb.Size(1280, 600)
	tb.Open(at)
	tb.Click("[data-testid=take]")
	tb.WaitFor(`document.querySelector("[data-testid=taken-by]")`)
	tb.Value(`document.querySelector("input[name=rest]").labels[0].click()`)
	tb.Value(`document.querySelector("input[name=cause]").labels[0].click()`)
	tb.Click("[data-testid=close]")
	tb.WaitFor(`document.getElementById("action-problem")`)
	tb.WaitFor(`document.activeElement.name === "action"`)
	for _, what := range []string{`document.getElementById("action-problem")`, `document.activeElement`} {
		tb.Want(what+" is in view", `(({ top, bottom }) => top >= 0 && bottom <= innerHeight)(`+what+`.getBoundingClientRect())`, "true")
	}
}

func fixed(at time.Time) url.Values {
	return url.Values{"cause": {"own"}, "own": {"something loose"}, "action": {"new insert"}, "fixed": {"other"}, "fixed_day": {at.Format(time.DateOnly)}, "fixed_time": {at.Format("15:04")}, "rest": {"unknown"}}
}

func TestChangeIsLoggedInTwoTapsAndSaysWhenNoSignalIsOpen(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	b := s.signIn(t, s.Operator)
	page := b.get(s.at("change")).is(http.StatusOK).says("Tool changed", "Adjusted: Axle seat diameter")
	tool := url.Values{"id": {page.field("id")}, "machine": {s.Machine.ID.String()}, "kind": {"tool"}}
	b.post(s.at("change"), tool).is(http.StatusSeeOther)
	s.Clock.Advance(time.Second)
	b.post(s.at("change"), tool).is(http.StatusSeeOther) // a double tap
	b.get(s.at() + "?done=change").says("The change is recorded.")
	b.get(s.at() + "?done=nonsense").saysNot(`data-testid="done"`)

	adjust := b.get(s.at("change", s.Diameter.ID.String())).is(http.StatusOK).
		says("No signal is open", "The numbers say: leave it alone", "recorded as unprompted")
	form := url.Values{"id": {adjust.field("id")}, "machine": {s.Machine.ID.String()}, "kind": {"adjustment"}, "characteristic": {s.Diameter.ID.String()}}
	bad := func(says string, values url.Values) {
		t.Helper()
		for k, v := range form {
			if !values.Has(k) {
				values[k] = v
			}
		}
		b.post(s.at("change"), values).is(http.StatusUnprocessableEntity).says(says)
	}
	bad("Say which way", url.Values{"size": {"0.002"}})
	bad("Say how far", url.Values{"direction": {"up"}})
	bad("Say how far", url.Values{"direction": {"up"}, "size": {"0"}})
	bad("without a sign", url.Values{"direction": {"up"}, "size": {"-0.002"}})
	bad("more decimals", url.Values{"direction": {"up"}, "size": {"0.0005"}})
	bad("not a number", url.Values{"direction": {"up"}, "size": {"some"}})
	bad("Say what was changed.", url.Values{"kind": {"weather"}})
	bad("in the future", url.Values{"direction": {"up"}, "size": {"0.002"}, "taken": {itoa(s.Clock.Now().Add(time.Hour).UnixMilli())}})
	bad("at most 300 characters", url.Values{"direction": {"up"}, "size": {"0.002"}, "note": {strings.Repeat("x", 301)}})
	form.Set("direction", "down")
	form.Set("size", "0,002")
	b.post(s.at("change"), with(form, "characteristic", s.Length.ID.String())).is(http.StatusNotFound)
	b.post(s.at("change"), with(form, "characteristic", s.Mass.ID.String())).is(http.StatusNotFound)
	b.post(s.at("change"), form).is(http.StatusSeeOther)
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{})
	if err != nil || len(h.Changes) != 2 {
		t.Fatalf("recorded %+v, %v", h.Changes, err)
	}
	last := h.Changes[1]
	if last.Prompted || last.Size == nil || last.Size.String() != "-0.002" {
		t.Errorf("recorded %+v", last)
	}
	s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	b.get(s.at("change", s.Diameter.ID.String())).says("A signal is open", "recorded as prompted")
}

func TestMachineStopsStartsAndChangesOver(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	at := s.at("machine", s.Machine.ID.String())
	stop := url.Values{"do": {"stop"}, "id": {b.get(s.at()).field("id")}}
	b.post(at, stop).is(http.StatusSeeOther)
	b.post(at, stop).is(http.StatusSeeOther)
	b.get(s.at()).says("Stands still since 12:00", "Report a start")
	s.Clock.Advance(2 * time.Hour)
	page := b.get(at).is(http.StatusOK).says("Axle 100", "Axle 130")
	form := url.Values{"do": {"changeover"}, "id": {page.field("id")}, "lot": {"4711"}}
	b.post(at, form).is(http.StatusUnprocessableEntity).says("Pick the part.", `value="4711"`)
	b.post(at, with(form, "part", s.Station.ID.String())).is(http.StatusUnprocessableEntity).says("There is no such part.")
	form.Set("part", s.PartB.ID.String())
	b.post(at, with(form, "lot", strings.Repeat("x", 61))).is(http.StatusUnprocessableEntity).says("at most 60 characters")
	b.post(at, with(form, "do", "dance")).is(http.StatusUnprocessableEntity)
	b.post(at, with(form, "id", "1")).is(http.StatusUnprocessableEntity)
	b.post(at, form).is(http.StatusSeeOther)
	b.get(s.at()).says("Order 4711", "Stands still")
	b.post(at, url.Values{"do": {"start"}, "id": {b.get(s.at()).field("id")}}).is(http.StatusSeeOther)
	b.get(s.at()).says("Runs Axle 130", "Order 4711")
}
