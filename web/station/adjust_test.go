package station_test

import (
	"net/http"
	"net/url"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// offset describes an adjusting point of the first machine that moves the diameter by
// twice what it is turned.
func (s *site) offset(t *testing.T) plant.Knob {
	t.Helper()
	k, err := s.SaveKnob(t.Context(), plant.Knob{ID: storetest.ID(), Machine: s.Machine.ID, Name: "X offset of turret 1", Unit: "mm", Step: *storetest.Decimal(t, "0.001"),
		Reason: "setting sheet", MadeBy: s.Engineer.ID, Moves: []plant.Gain{{Characteristic: s.Diameter.ID, PerUnit: *storetest.Decimal(t, "2")}}})
	if err != nil {
		t.Fatal(err)
	}
	return k
}

// changes are those on record, oldest first.
func (s *site) changes(t *testing.T) []plant.Change {
	t.Helper()
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{})
	if err != nil {
		t.Fatal(err)
	}
	return h.Changes
}

func TestAdviceWithNothingOpenAndThenWithASignal(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	k := s.offset(t)
	b := s.signIn(t, s.Operator)
	page := b.get(s.at("change", s.Diameter.ID.String())).is(http.StatusOK).
		says("No signal is open", "The last round was", "A steady machine is that far off", "Corrected after every round", "twin-chart", "X offset of turret 1", "Something else",
					"One step up is 0.001\u00a0mm. It moves Axle seat diameter by +0.002\u00a0mm.", "makes it larger", "recorded as unprompted").
		saysNot("checked") // nothing is suggested
	form := url.Values{"id": {page.field("id")}, "machine": {s.Machine.ID.String()}, "kind": {"adjustment"}, "characteristic": {s.Diameter.ID.String()},
		"knob": {k.ID.String()}, "direction": {"down"}, "size": {"0.0005"}}
	b.post(s.at("change"), form).is(http.StatusUnprocessableEntity).says("more decimals", "X offset of turret 1")
	b.post(s.at("change"), with(form, "knob", storetest.ID().String())).is(http.StatusUnprocessableEntity).says("not offered here any more")
	form.Set("size", "0,003")
	b.post(s.at("change"), form).is(http.StatusSeeOther)
	first := s.changes(t)[0]
	if size, _ := first.EffectOn(s.Diameter.ID); first.Prompted || first.Knob != k.ID || first.Turned.String() != "-0.003" || size.String() != "-0.006" {
		t.Errorf("recorded %+v", first)
	}
	b.get(s.at("change", s.Diameter.ID.String())+"?knob=none").is(http.StatusOK).says("Smaller", "One step is 0.001 mm.").saysNot("makes it larger")

	s.Clock.Advance(30 * time.Minute)
	s.MustRecord(t, s.Diameter, 14997, 14998, 14999, 14996, 15000)
	b.get(s.at("change", s.Diameter.ID.String())).says("A signal is open", "Take another round first", "measure="+s.Diameter.ID.String())
	s.Clock.Advance(10 * time.Minute)
	s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999) // 0.0060 above target
	cause := b.get(s.at("change", s.Diameter.ID.String())).
		says("Look for the cause first", "So far 1 round since then lies 0.0060\u00a0mm above target", "X offset of turret 1 by \u22120.003\u00a0mm", `data-testid="to-cause"`).
		saysNot("checked", "Adjust X offset")
	if got := cause.field("size"); got != "0.001" {
		t.Errorf("nobody has looked for the cause, and the size is %q", got)
	}
	s.take(t, b)
	turn := b.get(s.at("change", s.Diameter.ID.String())).
		says("Adjust X offset of turret 1 by \u22120.003\u00a0mm", "So far 1 round since then lies 0.0060\u00a0mm above target", "Look for the cause first", "recorded as prompted", `value="down" checked`)
	if got := turn.field("size"); got != "0.003" {
		t.Errorf("the advised size is %q", got)
	}
	form.Set("id", turn.field("id"))
	b.post(s.at("change"), form).is(http.StatusSeeOther)
	if list := s.changes(t); len(list) != 2 || !list[1].Prompted {
		t.Errorf("recorded %+v", list)
	}
	b.get(s.at("change", s.Diameter.ID.String())).says("Take another round first") // what was adjusted needs a round
	s.Clock.Advance(10 * time.Minute)
	s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14990, 14991)
	b.get(s.at("change", s.Diameter.ID.String())).says("Do not adjust: the evidence allows none", "95 % interval")
	s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	b.get(s.at("change", s.Force.ID.String())).says("Adjusting does not cure this")
}

// TestThePlanComesBeforeTheAdjustment: while a step waits the figure is a calculation, and
// nothing is put into the fields.
func TestThePlanComesBeforeTheAdjustment(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.planned(t)
	s.steady(t)
	s.offset(t)
	b := s.signIn(t, s.Operator)
	s.MustRecord(t, s.Diameter, 14997, 14998, 14999, 14996, 15000)
	s.take(t, b)
	s.Clock.Advance(10 * time.Minute)
	s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	page := s.at("change", s.Diameter.ID.String())
	b.get(page).says("Look for the cause first", "The plan is not walked to its end (Step 1 of 3)", "So far 1 round since then lies", "The numbers would allow", `data-testid="to-cause"`).
		saysNot("checked", "Adjust X offset")
}

// take takes what is open on the diameter.
func (s *site) take(t *testing.T, b *browser) {
	t.Helper()
	st, err := s.StationState(t.Context(), s.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range st.Characteristics {
		if c.ID == s.Diameter.ID && c.Matter != nil {
			at := s.at("matter", c.Matter.ID.String())
			b.post(at+"/take", url.Values{"version": {b.get(at).field("version")}}).is(http.StatusSeeOther)
			return
		}
	}
	t.Fatal("nothing is open on the diameter")
}

// TestAdjustingOnATablet goes both ways by touch: with nothing open, past the advice, to
// a hollow arrow; with a signal, to another round first and then as advised.
func TestAdjustingOnATablet(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.offset(t)
	tb := s.tablet(t)
	click := func(sel string) { t.Helper(); tb.Click(sel) }
	ready := func(testid string) {
		t.Helper()
		tb.WaitFor(`document.querySelector("[data-testid=` + testid + `]")`)
	}
	page := s.at("change", s.Diameter.ID.String())
	tb.Open(s.at("change"))
	click(`a[href="` + page + `"]`)
	ready("advice")
	tb.Want("advice", `document.querySelector("[data-testid=advice]").dataset.kind`, "leave")
	tb.WaitFor(`!document.querySelector("[data-step='1']").hidden`)
	for _, target := range []string{".turnables a", ".twin .button", ".stepper .key", ".last .button"} {
		tb.Want("tall enough for gloves: "+target, `[...document.querySelectorAll("`+target+`")].every((e) => e.offsetHeight >= 64)`, "true")
	}
	tb.Accessible("with nothing open")
	click(`[data-step="1"]`)
	tb.Want("two steps", `document.querySelector("[name=size]").value`, "0.002")
	click(`[name="direction"][value="up"]`)
	click(`[data-testid=log]`)
	ready("done")
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.Want("a hollow arrow stands on the chart", `document.querySelectorAll(".falls-chart .arrow.hollow").length > 0 && document.querySelectorAll(".falls-chart .arrow.filled").length === 0`, "true")

	s.Clock.Advance(30 * time.Minute)
	s.MustRecord(t, s.Diameter, 14997, 14998, 14999, 14996, 15000)
	tb.Open(page)
	tb.Want("a round first", `document.querySelector("[data-testid=advice]").dataset.kind`, "round")
	click(`.last a.solid`)
	tb.WaitFor(`location.search.includes("measure=")`)
	s.Clock.Advance(5 * time.Minute)
	s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	tb.Open(page)
	looks := func(testid string) string {
		return tb.Value(`getComputedStyle(document.querySelector("[data-testid=` + testid + `]")).backgroundColor`)
	}
	tb.Want("the cause comes first", `document.querySelectorAll("[name=direction]:checked").length + document.querySelector("[data-testid=advice]").textContent`, "0Look for the cause first")
	tb.Accessible("the cause first")
	dark, light := looks("to-cause"), looks("log")
	click(`[name="direction"][value="down"]`)
	if a, b := looks("log"), looks("to-cause"); dark == light || a != dark || b != light {
		t.Errorf("with a direction chosen logging is %s and the cause %s; before it was %s and %s", a, b, light, dark)
	}
	s.take(t, s.signIn(t, s.Operator))
	tb.Open(page)
	tb.Want("advised", `document.querySelector("[data-testid=advice]").dataset.kind`, "turn")
	tb.Accessible("advised")
	click(`[data-testid=log]`)
	ready("done")
	list := s.changes(t)
	if len(list) != 2 || list[0].Prompted || !list[1].Prompted || list[1].Turned.String() != "-0.003" {
		t.Errorf("recorded %+v", list)
	}
	tb.Open(page)
	tb.Want("both arrows stand on the chart", `[document.querySelectorAll(".verdict-chart .arrow.hollow").length, document.querySelectorAll(".verdict-chart .arrow.filled").length].join()`, "1,1")
}
