package station_test

import (
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// planned gives the family of the station a plan for a location that moved up.
func (s *site) planned(t testing.TB) {
	t.Helper()
	lower, upper := plant.Decimal{Units: 17}, plant.Decimal{Units: 19}
	if _, err := s.SavePlan(t.Context(), plant.ReactionPlan{Kind: plant.MatterUp, Scope: plant.PlanScope{Family: "turning"}, Confirm: true, Verify: true, Person: s.Engineer.ID,
		Steps: []plant.PlanStep{
			{Says: "Is the insert whole?", Kind: plant.StepYesNo, IfNot: "Change the insert."},
			{Says: "Read the collet pressure.", Kind: plant.StepValue, Unit: "bar", Lower: &lower, Upper: &upper, IfNot: "Set it to 18 bar."},
			{Says: "Blow out the collet.", Kind: plant.StepDone},
		}}); err != nil {
		t.Fatal(err)
	}
}

// answer sends the answer that the page asks for.
func (b *browser) answer(at, said string, more url.Values) page {
	b.T.Helper()
	p := b.get(at).is(http.StatusOK)
	form := url.Values{"said": {said}}
	for _, name := range []string{"id", "plan", "attempt", "step", "seq", "remedy"} {
		form.Set(name, p.field(name))
	}
	for k, v := range more {
		form[k] = v
	}
	return b.post(at+"/step", form)
}

func TestAPlanIsWalkedStepByStep(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.planned(t)
	at := s.open(t)
	b, second := s.signIn(t, s.Operator), s.signIn(t, s.Supervisor)
	page := b.get(at).says("Nobody has taken it yet", "Take it, and the first step is asked.", "Is the insert whole?", "A second person verifies it.").saysNot(`data-testid="step-form"`, `data-testid="close-form"`)
	version := page.field("version")
	b.post(at+"/take", url.Values{"version": {version}}).is(http.StatusSeeOther)
	b.get(at).says("Step 1 of 3", "Location up", "A steady chart is not a release").saysNot(`data-testid="close-form"`)

	// Two people answer one step: the second hears what the first said.
	mine := second.get(at)
	b.answer(at, "no", nil).is(http.StatusSeeOther)
	form := url.Values{"said": {"yes"}}
	for _, name := range []string{"id", "plan", "attempt", "step", "seq", "remedy"} {
		form.Set(name, mine.field(name))
	}
	second.post(at+"/step", form).is(http.StatusConflict).says("Operator 1 was quicker and answered this step: No. Nothing of yours was recorded.", "Change the insert.")

	// What is to be done then is asked before the next step, and anybody may go on.
	second.get(at).says("Step 1 of 3", "Answered: No. Then:", "Change the insert.")
	second.get(s.at()).says("Step 1 of 3, Operator 1")
	second.answer(at, "done", nil).is(http.StatusSeeOther)
	b.get(at).says("Step 2 of 3", "What do you read? It should be 17 to 19", "No (Operator 1, ", "was not as it should be; put right ", "(Supervisor 1)").saysNot("then Done")
	for raw, says := range map[string]string{"": "Type the value that you read.", "much": "Type the value that you read."} {
		b.answer(at, "value", url.Values{"value": {raw}}).is(http.StatusUnprocessableEntity).says(says)
	}
	b.answer(at, "value", url.Values{"value": {"18,2"}}).is(http.StatusSeeOther)
	b.answer(at, "skipped", nil).is(http.StatusUnprocessableEntity).says("Say why this step is left out.")
	b.get(at+"?step=2").says("18.2\u00a0bar (Operator 1", "Go on with step 3", "Answer it again")
	again := b.get(at + "?step=2")
	b.post(at+"/step", url.Values{"id": {again.field("id")}, "plan": {again.field("plan")}, "attempt": {"1"}, "step": {"2"}, "seq": {again.field("seq")}, "said": {"value"}, "value": {"17.5"}}).is(http.StatusSeeOther)
	b.post(at+"/close", url.Values{"version": {second.get(at).field("version")}, "cause": {"none"}, "done": {"nothing"}}).is(http.StatusUnprocessableEntity)
	b.answer(at, "skipped", url.Values{"reason": {"found"}}).is(http.StatusSeeOther)
	page = b.get(at).says("Say what was found and done", "Record what was done", "17.5\u00a0bar", "Left out: The cause is found already")
	closing := fixed(s.Clock.Now().Add(-time.Minute))
	closing.Set("version", page.field("version"))
	b.post(at+"/close", closing).is(http.StatusSeeOther)
	b.get(at).says("Take a round to confirm it", "new insert", "Measure: Axle seat diameter", "where it was put right.").saysNot(`data-testid="close-form"`, `data-testid="stands-still"`)
	machine := s.at("machine", s.Machine.ID.String())
	b.post(machine, url.Values{"id": {storetest.ID().String()}, "do": {"stop"}}).is(http.StatusSeeOther)
	still := b.get(at).says("stands still. Start it when it is safe to, then measure new parts.", `data-testid="start"`)
	_, start, _ := strings.Cut(still.body, `data-testid="stands-still"`)
	_, number, _ := strings.Cut(start, `name="id" value="`) // the start's own
	number, _, _ = strings.Cut(number, `"`)
	s.Clock.Advance(time.Second)
	if got := b.post(machine, url.Values{"id": {number}, "do": {"start"}, "matter": {at[strings.LastIndex(at, "/")+1:]}}).is(http.StatusSeeOther); got.to != at {
		t.Errorf("starting it leads to %s", got.to)
	}
	b.get(at).saysNot(`data-testid="stands-still"`)
	b.get(s.at()).says("Waits for a round to confirm it, Operator 1")

	// A round that signals again: the fix did not hold.
	s.Clock.Advance(10 * time.Minute)
	bad := s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	b.get(s.at("round", bad.Round.String())).says("The fix did not hold.", "walk the plan again")
	b.get(at).says("The fix did not hold. The plan is walked again.", "Step 1 of 3", "What did not hold", "signalled again at")
	s.Clock.Advance(time.Minute)
	b.answer(at, "yes", nil).is(http.StatusSeeOther)
	b.answer(at, "value", url.Values{"value": {"16"}}).is(http.StatusSeeOther)
	b.answer(at, "done", nil).is(http.StatusSeeOther) // set to 18 bar
	b.answer(at, "done", nil).is(http.StatusSeeOther)
	closing = url.Values{"cause": {"none"}, "action": {"collet blown out"}, "version": {b.get(at).field("version")}}
	b.post(at+"/close", closing).is(http.StatusSeeOther)
	s.Clock.Advance(10 * time.Minute)
	good := s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14990, 14991)
	b.get(s.at("round", good.Round.String())).says("The round after the fix shows nothing new.", "a second person verifies it before it is closed").saysNot("it can be closed")

	// Who fixed it cannot verify, nor can an operator; a supervisor signs, or sends it back.
	b.get(at).says("A second person verifies it", "Operator 1 recorded the fix.").saysNot(`name="password"`)
	page = second.get(at)
	b.post(at+"/verify", url.Values{"version": {page.field("version")}, "fix": {s.Station.ID.String()}, "password": {"right"}}).is(http.StatusForbidden)
	page = second.get(at).says("With your password you sign, as Supervisor 1")
	sign := url.Values{"version": {page.field("version")}, "fix": {page.field("fix")}, "do": {"accept"}}
	second.post(at+"/verify", sign).is(http.StatusUnprocessableEntity).says("Type your password: it is your signature.")
	second.post(at+"/verify", with(sign, "password", "wrong")).is(http.StatusUnprocessableEntity).says("Name or password is wrong.")
	sign.Set("password", "right")
	second.post(at+"/verify", with(sign, "do", "refuse")).is(http.StatusUnprocessableEntity).says("Say what is still to be done.")
	second.post(at+"/verify", sign).is(http.StatusSeeOther)
	second.post(at+"/verify", sign).is(http.StatusSeeOther) // a double tap
	b.get(at).says("Closed", "Verified by", "Supervisor 1", "collet blown out", "Attempt 1", "Attempt 2", "16\u00a0bar (Operator 1")
}

func TestOverdueRoundShowsItsPlanAndKeepsNobodyFromTakingIt(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	if _, err := s.SavePlan(t.Context(), plant.ReactionPlan{Kind: plant.MatterOverdue, Steps: []plant.PlanStep{{Says: "Take it now.", Kind: plant.StepDone}, {Says: "Call the next station.", Kind: plant.StepDone}}, Person: s.Engineer.ID}); err != nil {
		t.Fatal(err)
	}
	b := s.signIn(t, s.Operator)
	s.Clock.Advance(20 * time.Minute)
	measure := s.at() + "?measure=" + s.Diameter.ID.String()
	b.get(measure).says("This round is overdue. What the plan says:", "Call the next station.", `name="reading-`)
	s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14990, 14991)
	s.MustRecord(t, s.Force, 610, 612, 611, 611, 609, 613)
	s.MustRecord(t, s.Mass, 120)
	b.get(measure).saysNot("This round is overdue")
}

// TestPlanIsWalkedWithAnInterruptionByTwoPeopleAndSigned is the whole way in a browser:
// an operator is called away, another goes on, a supervisor verifies with a signature.
func TestPlanIsWalkedWithAnInterruptionByTwoPeopleAndSigned(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.planned(t)
	at := s.open(t)
	b := browsertest.Start(t)
	sit := func(p plant.Person) *browsertest.Page {
		page := b.Person(s.url)
		page.Open("/sign-in")
		page.WaitFor(`document.activeElement.id === "login"`)
		page.Keys(p.Login + "\t" + "right\r")
		page.WaitFor(`location.pathname !== "/sign-in"`)
		page.Size(1280, 800)
		return page
	}
	count := `document.querySelector(".plan-count b")?.textContent`
	says := `document.querySelector(".plan-says")?.textContent`

	first := sit(s.Operator)
	first.Open(at)
	first.Click("[data-testid=take]")
	first.WaitFor(count + ` === "Step 1 of 3"`)
	first.Accessible("a step")
	first.FitsWidth("a step", 320, 800, 1280)
	first.Size(1280, 800)
	if small := first.Value(`[...document.querySelectorAll("form button, summary, .walk a")].filter((e) => e.getClientRects().length && e.getBoundingClientRect().height < 63.5 && !e.closest(".topbar")).map((e) => e.textContent.trim()).join("|")`); small != `""` && small != "" {
		t.Errorf("too small for gloves: %s", small)
	}
	first.Click("[data-testid=say-no]")
	first.WaitFor(says + ` === "Change the insert."`)
	first.Open(s.at()) // called away: a round is taken meanwhile
	first.WaitFor(`document.querySelector("[data-testid=side]").textContent.includes("Step 1 of 3")`)

	second := sit(s.Supervisor)
	second.Open(at)
	second.WaitFor(says + ` === "Change the insert."`)
	second.Click("[data-testid=say-done]")
	second.WaitFor(count + ` === "Step 2 of 3"`)
	second.Fill("#step-value", "18.2")
	second.Click("[data-testid=say-value]")
	second.WaitFor(count + ` === "Step 3 of 3"`)

	first.Open(at)
	first.WaitFor(count + ` === "Step 3 of 3"`)
	first.Click("[data-testid=say-done]")
	first.WaitFor(`document.querySelector("[data-testid=close-form]")`)
	first.Value(`document.querySelector("input[name=cause]").labels[0].click()`)
	first.Fill("input[name=action]", "Insert changed")
	first.Click("input[name=rest][value=gone]")
	first.Accessible("where the rest is")
	first.Click("[data-testid=close]")
	first.WaitFor(`document.querySelector("[data-testid=confirm]")`)
	first.Accessible("waiting for a round")
	s.Clock.Advance(5 * time.Minute)
	s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14990, 14991)

	second.Open(at)
	second.WaitFor(`document.querySelector("[data-testid=verify-form]")`)
	second.Accessible("verifying")
	second.Fill("input[name=password]", "right")
	second.Click("[data-testid=verify]")
	second.WaitFor(`document.querySelector("[data-testid=done]")`)
	first.Open(at)
	first.WaitFor(`document.querySelector("[data-testid=record]")`)
	first.Accessible("closed")
	record := first.Value(`document.querySelector("[data-testid=record]").textContent`)
	for _, who := range []string{"Operator 1", "Supervisor 1", "18.2"} {
		if !strings.Contains(record, who) {
			t.Errorf("the record does not say %q: %s", who, record)
		}
	}
}

// TestAStepThatStopsTheMachineRecordsIt: as the machine's button does, once; where it is
// reported stopped already the step says so.
func TestAStepThatStopsTheMachineRecordsIt(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	if _, err := s.SavePlan(t.Context(), plant.ReactionPlan{Kind: plant.MatterUp, Person: s.Engineer.ID, Steps: []plant.PlanStep{
		{Says: "Stop the lathe.", Kind: plant.StepStop, IfNot: "dropped"}, {Says: "Stop it for good.", Kind: plant.StepStop}}}); err != nil {
		t.Fatal(err)
	}
	at := s.open(t)
	b := s.signIn(t, s.Operator)
	b.post(at+"/take", url.Values{"version": {b.get(at).field("version")}}).is(http.StatusSeeOther)
	machine := func() (m plant.MachineNow, states int) {
		t.Helper()
		st, err := s.StationState(t.Context(), s.Station.ID, 1)
		if err != nil {
			t.Fatal(err)
		}
		for _, m = range st.Machines {
			if m.ID == s.Machine.ID {
				break
			}
		}
		if err := s.Pool().QueryRow(t.Context(), `select count(*) from machine_state where machine_id = $1`, s.Machine.ID).Scan(&states); err != nil {
			t.Fatal(err)
		}
		return m, states
	}
	_, before := machine()
	p := b.get(at).says("Stop the lathe.", "The machine is stopped", "This also records that the machine stands still.")
	form := url.Values{"said": {"done"}}
	for _, name := range []string{"id", "plan", "attempt", "step", "seq", "remedy"} {
		form.Set(name, p.field(name))
	}
	for range 2 { // a double tap is one
		b.post(at+"/step", form).is(http.StatusSeeOther)
	}
	if m, n := machine(); m.Running() || n != before+1 {
		t.Errorf("the machine is %+v with %d states, %d before", m.State, n, before)
	}
	b.get(at).says("Stop it for good.", "is reported stopped since", "Go on")
	b.answer(at, "done", nil).is(http.StatusSeeOther)
	if _, n := machine(); n != before+1 {
		t.Errorf("it was stopped %d times", n-before)
	}
}
