package main

import (
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

// typedForm is a form on a tablet that somebody has half filled in.
type typedForm struct {
	name, path string
	fill       func(p *browsertest.Page)
	typed      string // expression of what stands in it
	want       string
	kept       string // the element that says that it was brought back
	save       string // what is clicked at last
	by         string // who it is on record as
	whole      bool   // play every combination on it, and not only the hardest
}

// into types into a field as fingers do.
func into(p *browsertest.Page, selector, text string) {
	p.WaitFor(find(selector))
	p.Value(find(selector) + `.focus(), ` + find(selector) + `.select?.()`)
	p.Keys(text)
}

// choose switches the language of whoever is signed in, by the menu in the bar or, where a
// page has none, as that menu does.
func choose(p *browsertest.Page, lang string) {
	p.Value(`(() => { const f = document.createElement("form"); f.method = "post"; f.action = "/language";
		for (const [n, v] of [["language", "` + lang + `"], ["to", location.pathname + location.search]]) {
			const i = document.createElement("input"); i.name = n; i.value = v; f.append(i); }
		document.body.append(f); f.submit(); return 1 })()`)
	p.WaitFor(`document.readyState === "complete" && !document.querySelector('body > form[action="/language"]')`)
}

// TestWhatIsHalfTypedSurvives plays, on every form of a tablet, the lock, another person and
// another language at once, then a session that ended without the tablet knowing; and at
// last somebody saves, and it is theirs. On a round, a change and a matter it plays each of
// them alone as well.
func TestWhatIsHalfTypedSurvives(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	lower, upper := plant.Decimal{Units: 17}, plant.Decimal{Units: 19}
	if _, err := r.SavePlan(t.Context(), plant.ReactionPlan{Kind: plant.MatterReading, Scope: plant.PlanScope{Characteristic: r.Mass.ID}, Person: r.Engineer.ID,
		Steps: []plant.PlanStep{{Says: "Read the collet pressure.", Kind: plant.StepValue, Unit: "bar", Lower: &lower, Upper: &upper, IfNot: "Set it to 18 bar."}}}); err != nil {
		t.Fatal(err)
	}
	r.Clock.Advance(30 * time.Minute)
	r.MustRecord(t, r.Mass, 160)
	last := r.MustRecord(t, r.Diameter, 14998, 14999, 14998, 14999, 14998)
	r.badge(t, r.Operator.ID, "1001")
	r.badge(t, r.Supervisor.ID, "1003")
	at := "/station/" + r.Station.ID.String()
	m, planned := r.matterOf(t, r.Diameter), r.matterOf(t, r.Mass)
	if err := r.TakeMatter(t.Context(), planned.ID, planned.Version, r.Operator.ID); err != nil {
		t.Fatal(err)
	}
	walk := at + "/matter/" + planned.ID.String()
	const keptNote = `form[data-typed] [data-typed-kept]:not([hidden])`
	p, _ := r.tabletPage(t, browsertest.Start(t), plant.Device{Kind: plant.Tablet, Name: "Tablet", Station: r.Station.ID})
	lock := func(badge string) {
		t.Helper()
		sleep(p, plant.DefaultLock)
		p.WaitFor(find("[data-testid=locked]"))
		badgeIn(p, badge)
	}
	badgeIn(p, "1001")
	for _, f := range []typedForm{
		{name: "round", whole: true, path: at + "?measure=" + r.Diameter.ID.String(), kept: "[data-kept]:not([hidden])",
			fill: func(p *browsertest.Page) { p.WaitFor(find("[data-scripted]")); p.Keys("14.990\r14.991\r") }},
		{name: "change", whole: true, path: at + "/change", fill: func(p *browsertest.Page) { into(p, "input[name=note]", "Insert turned") },
			typed: find("input[name=note]") + ".value", want: "Insert turned", save: "button[name=kind][value=tool]",
			by: `select person_id from change where kind = 'tool' and note = 'Insert turned'`},
		{name: "adjustment", path: at + "/change/" + r.Diameter.ID.String() + "?knob=none", fill: func(p *browsertest.Page) {
			p.Click("[name=direction][value=down] + svg")
			into(p, "input[name=size]", "0.002")
			p.Click("[data-step='1']")
		}, typed: find("[name=direction]:checked") + `?.value + " " + Number(` + find("input[name=size]") + `.value.replace(",", "."))`, want: "down 0.003",
			save: "[data-testid=log]", by: `select person_id from change where kind = 'adjustment'`},
		{name: "correction", path: at + "/correct", fill: func(p *browsertest.Page) {
			into(p, "input[name=reading]", "14.997")
			p.Click("input[name=reason] + span")
		}, typed: find("input[name=reading]") + `.value.replace(",", ".") + " " + Boolean(` + find("[name=reason]:checked") + `)`, want: "14.997 true",
			save: "[data-testid=save]", by: `select person_id from subgroup where id = '` + last.Parts[0].Subgroup.String() + `' and version = 2`},
		{name: "machine", path: at + "/machine/" + r.Machine.ID.String(), fill: func(p *browsertest.Page) { into(p, "input[name=lot]", "L-7") },
			typed: find("input[name=lot]") + ".value", want: "L-7"},
		{name: "note for the next shift", path: "/board/handover", fill: func(p *browsertest.Page) { into(p, "textarea[name=text]", "Coolant is low") },
			typed: find("textarea[name=text]") + ".value", want: "Coolant is low", save: ".ho-write button[type=submit]",
			by: `select person_id from shift_note where text = 'Coolant is low'`},
		{name: "reason to leave a step out", path: walk, fill: func(p *browsertest.Page) {
			p.Click("details.leave-out > summary")
			into(p, "[data-testid=leave-out] input[name=note]", "No gauge here")
		}, typed: find("[data-testid=leave-out] input[name=note]") + `.value + " " + ` + find("details.leave-out") + `.open`, want: "No gauge here true"},
		{name: "step of a plan", path: walk, fill: func(p *browsertest.Page) { into(p, "#step-value", "18") },
			typed: find("#step-value") + ".value", want: "18", save: "[data-testid=say-value]", by: `select person_id from matter_answer where matter_id = '` + planned.ID.String() + `'`},
		{name: "matter", whole: true, path: at + "/matter/" + m.ID.String(), fill: func(p *browsertest.Page) {
			p.Click("input[name=cause][value=own] + span")
			into(p, "input[name=own]", "Chips in the chuck")
			into(p, "input[name=action]", "Chuck cleaned")
			p.Click("input[name=rest][value=used] + span")
		}, typed: find("[name=cause]:checked") + `?.value + " " + ` + find("input[name=own]") + `.value + " " + ` + find("input[name=action]") + `.value + " " + ` + find("[name=rest]:checked") + `?.value`,
			want: "own Chips in the chuck Chuck cleaned used", save: "[data-testid=close]", by: `select closed_by from matter where id = '` + m.ID.String() + `'`},
	} {
		func() {
			if f.typed == "" {
				f.typed = `[...document.querySelectorAll("[data-reading]")].map((i) => i.value.replace(",", ".")).join(" ").trim()`
			}
			if f.kept == "" {
				f.kept = keptNote
			}
			is := func(what string) {
				t.Helper()
				p.WaitFor(find(f.kept))
				p.Want(f.name+" "+what, f.typed, f.want)
			}
			p.Open(f.path)
			f.fill(p)
			if f.want == "" {
				f.want = p.Value(f.typed)
			}
			p.Want(f.name+" as typed", f.typed, f.want)
			if f.whole {
				choose(p, "de")
				is("in another language")
				lock("1001")
				is("after the lock, by the same person")
				choose(p, "en")
				is("in the first language again")
				p.Click("[data-sign-out] button")
				badgeIn(p, "1003")
				is("with another person")
				p.Accessible(f.name + " that was brought back")
				lock("1001")
				is("after the lock, by the first person")
			}
			lock("1003")
			choose(p, "es")
			is("after the lock, by another person in another language")
			choose(p, "en")
			if f.name != "round" {
				p.WaitFor(find(keptNote) + `?.textContent.includes("somebody else")`) // who typed it is not who saves it, and that is said
			}
			// The next form is the first person's again, and what was not saved here is gone.
			defer func() {
				p.Value(`localStorage.clear()`)
				p.Open(at)
				lock("1001")
			}()
			if f.save == "" {
				return
			}
			// The server ends the session and the tablet does not know: what is sent is not
			// taken, and nothing is lost.
			r.Clock.Advance(time.Second)
			if err := r.SetActive(t.Context(), r.Supervisor.ID, false, uuid.Nil); err != nil {
				t.Fatal(err)
			}
			if err := r.SetActive(t.Context(), r.Supervisor.ID, true, uuid.Nil); err != nil {
				t.Fatal(err)
			}
			r.Clock.Advance(time.Second)
			p.WaitFor(find(f.save) + ` || location.pathname.startsWith("/sign-in")`)
			p.Value(find(f.save) + `?.click()`)
			p.WaitFor(`location.pathname.startsWith("/sign-in")`)
			badgeIn(p, "1003")
			is("after a send without a session")
			p.Value(`window.before = true`)
			p.Click(f.save)
			p.WaitFor(`!window.before && document.readyState === "complete"`)
			p.WaitFor(`Object.keys(localStorage).every((k) => !k.startsWith("holdfast.typed."))`)
			var by uuid.UUID
			if err := r.Pool().QueryRow(t.Context(), f.by).Scan(&by); err != nil || by != r.Supervisor.ID {
				t.Errorf("%s: on record as by %v, %v; want who saved it, %v", f.name, by, err, r.Supervisor.ID)
			}
			p.Open(f.path)
			if got := p.Value(`Boolean(` + find(keptNote) + `)`); got != "false" {
				t.Errorf("%s: what was saved is brought back once more", f.name)
			}
		}()
	}
	whole(t, r)
}

// TestWhatIsTypedAwayFromATabletIsOnesOwn: a browser that several people use one after the
// other shows nobody what another typed.
func TestWhatIsTypedAwayFromATabletIsOnesOwn(t *testing.T) {
	t.Parallel()
	r := serve(t)
	p := r.signIn(t, browsertest.Start(t), "operator1")
	at := "/station/" + r.Station.ID.String() + "/change"
	p.Open(at)
	into(p, "input[name=note]", "Insert turned")
	for _, one := range []struct{ login, want string }{{"supervisor1", ""}, {"operator1", "Insert turned"}} {
		p.Click("[data-sign-out] button")
		p.WaitFor(find("#login"))
		p.Value(find("#login") + ".focus()")
		p.Keys(one.login + "\t" + secret + "\r")
		p.WaitFor(`location.pathname !== "/sign-in" && document.readyState === "complete"`)
		p.Open(at)
		p.WaitFor(find("input[name=note]"))
		p.Want("as "+one.login, find("input[name=note]")+".value", one.want)
	}
	// A refused form is no saved one: what was typed stays until it is taken.
	p.Open("/station/" + r.Station.ID.String() + "/change/" + r.Diameter.ID.String())
	into(p, "input[name=size]", "x")
	p.Click("[data-testid=log]")
	p.WaitFor(find("#size-problem"))
	p.Open("/station/" + r.Station.ID.String() + "/change/" + r.Diameter.ID.String())
	p.WaitFor(find("[data-typed-kept]:not([hidden])"))
	p.Want("after a refusal", find("input[name=size]")+".value", "x")
	p.Click("[data-typed-afresh]")
	p.WaitFor(find("input[name=size]") + `?.value !== "x"`)
	if keys := p.Value(`Object.keys(localStorage).filter((k) => k.includes("` + r.Diameter.ID.String() + `")).join()`); strings.Contains(keys, "typed") {
		t.Errorf("thrown away and still kept: %s", keys)
	}
}

// matterOf is what is open on a characteristic.
func (r *running) matterOf(t testing.TB, c plant.Characteristic) plant.Matter {
	t.Helper()
	st, err := r.StationState(t.Context(), c.StationID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, one := range st.Characteristics {
		if one.ID == c.ID && one.Matter != nil {
			return *one.Matter
		}
	}
	t.Fatalf("no matter is open on %s", c.Name)
	return plant.Matter{}
}
