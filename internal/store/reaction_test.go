package store_test

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

func savePlan(t testing.TB, p *storetest.Plant, plan plant.ReactionPlan) plant.ReactionPlan {
	t.Helper()
	plan.Person = p.Engineer.ID
	saved, err := p.SavePlan(context.Background(), plan)
	if err != nil {
		t.Fatal(err)
	}
	return saved
}

func done(says ...string) []plant.PlanStep {
	var out []plant.PlanStep
	for _, s := range says {
		out = append(out, plant.PlanStep{Says: s, Kind: plant.StepDone})
	}
	return out
}

// TestTheNarrowestPlanCounts: the characteristic's own before its family's before the
// plant's; one that is withdrawn gives way again, and a matter keeps what it had.
func TestTheNarrowestPlanCounts(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	inForce := func(want string) {
		t.Helper()
		plan, err := p.PlanInForce(ctx, p.Diameter.ID, plant.MatterUp)
		got := ""
		if plan != nil {
			got = plan.Steps[0].Says
		}
		if err != nil || got != want {
			t.Errorf("in force: %q, %v; want %q", got, err, want)
		}
	}
	inForce("")
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Steps: done("plant")})
	inForce("plant")
	own := plant.PlanScope{Characteristic: p.Diameter.ID}
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Scope: own, Steps: done("own")})
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Scope: plant.PlanScope{Family: "turning"}, Steps: done("family")})
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterDown, Scope: own, Steps: done("down")})
	inForce("own")
	p.Clock.Advance(time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Scope: own, Version: 1, Withdrawn: true})
	inForce("family")
	m, err := p.Matter(ctx, a.Parts[0].Matter)
	if steps := m.Progress().Steps; err != nil || len(steps) != 1 || steps[0].Says != "own" {
		t.Errorf("the matter walks %+v, %v; want the plan that was in force when it was opened", steps, err)
	}
	savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Scope: own, Version: 2, Steps: done("own again")})
	inForce("own again")
	if _, err := p.SavePlan(ctx, plant.ReactionPlan{Kind: plant.MatterUp, Scope: own, Version: 2, Steps: done("late")}); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("saving over a version that was not seen: %v", err)
	}
	if _, err := p.SavePlan(ctx, plant.ReactionPlan{Kind: plant.MatterUp, Scope: plant.PlanScope{Family: "weaving"}, Steps: done("x")}); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("a plan for a family that there is not: %v", err)
	}
	all, err := p.Plans(ctx)
	if err != nil || len(all) != 4 {
		t.Errorf("%d plans, %v; want the newest version of four", len(all), err)
	}
	versions, err := p.PlanVersions(ctx, own, plant.MatterUp)
	if err != nil || len(versions) != 3 || versions[0].Version != 3 || !versions[1].Withdrawn || versions[2].PersonName != "Engineer 1" {
		t.Errorf("versions %+v, %v", versions, err)
	}
	consistent(t, p)
}

// TestAMatterFromSignalToVerified walks one all the way, with a fix that does not hold.
func TestAMatterFromSignalToVerified(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	lower := storetest.Decimal(t, "17")
	plan := savePlan(t, p, plant.ReactionPlan{Kind: plant.MatterUp, Scope: plant.PlanScope{Family: "turning"}, Confirm: true, Verify: true, Steps: []plant.PlanStep{
		{Says: "Is the insert whole?", Kind: plant.StepYesNo, IfNot: "Change it."}, {Says: "Collet pressure", Kind: plant.StepValue, Unit: "bar", Lower: lower}}})
	p.Clock.Advance(30 * time.Minute)
	id := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	read := func() plant.Matter {
		t.Helper()
		m, err := p.Matter(ctx, id)
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
	is := func(stage plant.Stage) plant.Matter {
		t.Helper()
		m := read()
		if got := m.Progress().Stage; got != stage {
			t.Fatalf("stage %s, want %s", got, stage)
		}
		return m
	}
	attempt := 1
	answer := func(step int, said plant.Said, remedy bool) error {
		a := plant.StepAnswer{ID: storetest.ID(), Matter: id, Plan: plan.ID, Attempt: attempt, Step: step, Seq: 1, Said: said, Remedy: remedy, Person: p.Operator.ID, Note: "not possible"}
		if said == plant.SaidValue {
			a.Value = storetest.Decimal(t, "17.5")
		}
		err := p.AnswerStep(ctx, a)
		if err == nil {
			if again := p.AnswerStep(ctx, a); again != nil {
				t.Errorf("the same answer sent again: %v", again)
			}
			a.Said, a.Note = plant.SaidSkipped, "another"
			if again := p.AnswerStep(ctx, a); !plant.IsKind(again, plant.Conflict) {
				t.Errorf("another answer under its number: %v", again)
			}
		}
		return err
	}
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	conflict := func(err error) {
		t.Helper()
		if !plant.IsKind(err, plant.Conflict) {
			t.Errorf("%v, want a conflict", err)
		}
	}
	finish := func() error {
		return p.CloseMatter(ctx, plant.ClosingRequest{Matter: id, Version: read().Version, Cause: "Insert chipped", Action: "Insert changed", Person: p.Operator.ID})
	}
	is(plant.StageOpen)
	conflict(answer(1, plant.SaidYes, false)) // nobody took it
	conflict(finish())
	must(p.TakeMatter(ctx, id, 1, p.Operator.ID))
	is(plant.StageWorking)
	conflict(answer(2, plant.SaidValue, false)) // not yet
	must(answer(1, plant.SaidNo, false))
	conflict(answer(1, plant.SaidYes, false)) // somebody was quicker
	if err := finish(); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("closing with a step open: %v", err)
	}
	must(answer(1, plant.SaidDone, true))
	must(answer(2, plant.SaidValue, false))
	p.Clock.Advance(time.Minute)
	must(finish())
	is(plant.StageConfirming)
	conflict(answer(2, plant.SaidValue, false))
	conflict(finish())
	p.Clock.Advance(time.Minute)
	if a := p.MustRecord(t, p.Diameter, high...); a.Parts[0].Matter != id || a.Parts[0].Opened {
		t.Errorf("the round after a fix that did not hold: %+v", a)
	}
	m := is(plant.StageWorking)
	if pr := m.Progress(); pr.Attempt != 2 || pr.Next != 0 {
		t.Errorf("%+v; want the plan to be walked again", pr)
	}
	attempt = 2
	must(answer(1, plant.SaidYes, false))
	must(answer(2, plant.SaidSkipped, false))
	p.Clock.Advance(time.Minute)
	must(finish())
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Diameter, calm...)
	m = is(plant.StageVerifying)
	fix := m.Progress().Fix
	verify := func(by plant.Person, ok bool) error {
		return p.VerifyFix(ctx, plant.VerifyRequest{Matter: id, Version: read().Version, Fix: fix.ID, Accepted: ok, Note: "seen", Person: by.ID})
	}
	if err := verify(p.Operator, true); !plant.IsKind(err, plant.Forbidden) {
		t.Errorf("who fixed it verifies: %v", err)
	}
	must(verify(p.Supervisor, true))
	m = is(plant.StageClosed)
	if m.ClosedBy != p.Supervisor.ID || m.Closing != plant.Fixed || m.Cause != "Insert chipped" || !m.RestartAt.Equal(fix.RestartAt) || len(m.Fixes) != 2 || m.Fixes[0].Stands() {
		t.Errorf("closed: %+v", m)
	}
	var signed string
	if err := p.Pool().QueryRow(ctx, `select convert_from(body, 'UTF8')::jsonb->'signature'->>'meaning' from ledger where kind = 'matter verification'`).Scan(&signed); err != nil || signed != "verify" {
		t.Errorf("signature %q, %v", signed, err)
	}
	if st, err := p.StationState(ctx, p.Station.ID, 1); err != nil || slices.ContainsFunc(st.Characteristics, func(c plant.CharacteristicState) bool { return c.Matter != nil }) {
		t.Errorf("something is open still: %v", err)
	}
	consistent(t, p)

	for _, sql := range []string{
		`update reaction_plan set verify = false`, `update reaction_plan set steps = '[]'`, `delete from matter_answer where said = 'value'`,
		`update matter_answer set said = 'yes' where said = 'no'`, `update matter_fix set action = 'nothing' where number = 1`,
		`update matter_fix set restart_at = restart_at - interval '1 minute' where number = 2`, `update matter_verification set person_id = '` + p.Engineer.ID.String() + `'`,
		`insert into matter_answer select gen_random_uuid(), plant_id, matter_id, plan_id, attempt, step, remedy, 2, said, value, note, at, person_id, digest from matter_answer limit 1`,
	} {
		found(t, p, sql)
	}
	const unconfirmed = "was closed without the round that its plan demands to confirm the fix"
	since := ` where characteristic_id = '` + p.Diameter.ID.String() + `' and taken_at >= (select restart_at from matter_fix where number = 2)`
	for _, sql := range []string{
		`delete from subgroup` + since,
		`update subgroup set voided = true, recorded_at = recorded_at - interval '1 microsecond'` + since,
		`update subgroup set recorded_at = recorded_at + interval '1 hour'` + since,
		`update matter_fix set restart_at = restart_at + interval '1 hour' where number = 2`,
	} {
		foundSaying(t, p, sql, unconfirmed)
	}
	// What confirmed the fix did so, also when it is voided afterwards.
	p.Clock.Advance(time.Minute)
	last, err := p.History(ctx, p.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	point := last.Points[len(last.Points)-1]
	if _, err := p.Correct(ctx, plant.Correction{Characteristic: p.Diameter.ID, Subgroup: point.Subgroup, TakenAt: point.TakenAt, Replaces: 1, Void: true,
		Reason: plant.CorrectionReasons[0], Person: p.Supervisor.ID}); err != nil {
		t.Fatal(err)
	}
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Errorf("an honest record differs: %v, %v", ds, err)
	}
}

// player of matters: everything that people do about one characteristic, in any order.
type reactor struct {
	player
	plans []plant.ReactionPlan // as saved
	kinds map[string]uuid.UUID // matter and kind: the plan that it was added with
	facts map[string]bool
}

func (y *reactor) steps() []plant.PlanStep {
	all := []plant.PlanStep{
		{Says: "Do this.", Kind: plant.StepDone}, {Says: "Is it so?", Kind: plant.StepYesNo, IfNot: "Make it so."},
		{Says: "Is it broken?", Kind: plant.StepYesNo, ExpectNo: true}, {Says: "Read it.", Kind: plant.StepValue, Unit: "bar", Upper: &plant.Decimal{Units: 5}, IfNot: "Turn it down."},
	}
	y.rng.Shuffle(len(all), func(i, j int) { all[i], all[j] = all[j], all[i] })
	return all[:1+y.rng.IntN(2)]
}

func (y *reactor) open() *plant.Matter {
	ctx := context.Background()
	var id uuid.UUID
	err := y.p.Pool().QueryRow(ctx, `select id from matter where characteristic_id = $1 and closed_at is null`, y.c.ID).Scan(&id)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil
	}
	if err != nil {
		y.t.Fatal(err)
	}
	m, err := y.p.Matter(ctx, id)
	if err != nil {
		y.t.Fatal(err)
	}
	return &m
}

// withdraw corrects everything that signals in a matter into something calm.
func (y *reactor) withdraw(m *plant.Matter) error {
	for _, pt := range y.points() {
		if !slices.ContainsFunc(pt.Standing(), func(s plant.Signal) bool { return s.Matter == m.ID }) {
			continue
		}
		if _, err := y.p.Correct(context.Background(), plant.Correction{Characteristic: y.c.ID, Subgroup: pt.Subgroup, TakenAt: pt.TakenAt, Replaces: pt.Version,
			Readings: calm, Reason: "typing slip", Person: y.p.Operator.ID}); err != nil {
			return err
		}
	}
	return nil
}

// react does one thing; a refusal is as good as a deed.
func (y *reactor) react() error {
	ctx, p := context.Background(), y.p
	people := []plant.Person{p.Operator, p.Supervisor}
	who := people[y.rng.IntN(2)].ID
	m := y.open()
	version := 0
	if m != nil {
		if version = m.Version; y.rng.IntN(15) == 0 {
			version--
		}
	}
	switch k := y.rng.IntN(50); {
	case k == 0 && m != nil:
		y.note("withdraw")
		return y.withdraw(m)
	case k < 4:
		scopes := []plant.PlanScope{{}, {Family: "turning"}, {Characteristic: y.c.ID}}
		plan := plant.ReactionPlan{Scope: scopes[y.rng.IntN(3)], Kind: plant.MatterKinds[y.rng.IntN(6)], Confirm: y.rng.IntN(2) == 0, Verify: y.rng.IntN(3) == 0,
			Withdrawn: y.rng.IntN(6) == 0, Steps: y.steps(), Person: p.Engineer.ID}
		for _, old := range y.plans {
			if old.Scope == plan.Scope && old.Kind == plan.Kind {
				plan.Version = old.Version
			}
		}
		y.note("plan for %v, %s", plan.Scope, plan.Kind)
		saved, err := p.SavePlan(ctx, plan)
		if err == nil {
			y.plans = append(y.plans, saved)
		}
		return err
	case k < 18 || m == nil:
		return y.act()
	case k < 22:
		y.note("take")
		return p.TakeMatter(ctx, m.ID, version, who)
	case k < 37:
		pr := m.Progress()
		if len(pr.Steps) == 0 {
			return nil
		}
		w := pr.Steps[min(pr.Next, len(pr.Steps)-1)]
		if y.rng.IntN(6) == 0 {
			w = pr.Steps[y.rng.IntN(len(pr.Steps))]
		}
		a := plant.StepAnswer{ID: storetest.ID(), Matter: m.ID, Plan: w.Plan, Attempt: pr.Attempt, Step: w.Step, Seq: 1 + y.rng.IntN(20)/19, Person: who, Note: "cannot",
			Said: []plant.Said{plant.SaidDone, plant.SaidYes, plant.SaidNo, plant.SaidValue, plant.SaidSkipped}[y.rng.IntN(5)], Value: &plant.Decimal{Units: y.rng.Int64N(9)}}
		a.Remedy = w.AsksRemedy() && y.rng.IntN(4) > 0
		y.note("answer step %d of attempt %d: %s, remedy %v", a.Step, a.Attempt, a.Said, a.Remedy)
		return p.AnswerStep(ctx, a)
	case k < 44:
		req := plant.ClosingRequest{Matter: m.ID, Version: version, Cause: "Not found", Person: who}
		if y.rng.IntN(3) > 0 {
			req.Action = "Insert changed"
			if span := p.Clock.Now().Sub(m.OpenedTaken); span > 0 && y.rng.IntN(2) == 0 {
				req.FixedAt = m.OpenedTaken.Add(time.Duration(y.rng.Int64N(int64(span))))
			}
		}
		y.note("close, action %q", req.Action)
		return p.CloseMatter(ctx, req)
	default:
		fix := uuid.New()
		if f := m.Progress().Fix; f != nil {
			fix = f.ID
		}
		y.note("verify")
		return p.VerifyFix(ctx, plant.VerifyRequest{Matter: m.ID, Version: version, Fix: fix, Accepted: y.rng.IntN(4) > 0, Note: "seen", Person: who})
	}
}

// expected is the plan that is in force for a kind by the test's own book.
func (y *reactor) expected(kind plant.MatterKind) uuid.UUID {
	for _, scope := range []plant.PlanScope{{Characteristic: y.c.ID}, {Family: "turning"}, {}} {
		for _, p := range slices.Backward(y.plans) {
			if p.Scope == scope && p.Kind == kind {
				if !p.Withdrawn {
					return p.ID
				}
				break
			}
		}
	}
	return uuid.Nil
}

// kept demands that each kind keeps the plan that was in force when it was added.
func (y *reactor) kept(m *plant.Matter) {
	for _, k := range m.Kinds {
		key := m.ID.String() + string(k.Kind)
		want, known := y.kinds[key]
		if !known {
			want = y.expected(k.Kind)
			y.kinds[key] = want
		}
		if k.Plan != want {
			y.t.Fatalf("%s walks plan %s, want %s; last done: %v", k.Kind, k.Plan, want, y.did[max(0, len(y.did)-20):])
		}
	}
}

// ended demands that what the plans of before asked for is on record, read from the
// tables and not through the program's own judgement.
func (y *reactor) ended(before *plant.Matter) {
	ctx, p := context.Background(), y.p
	fail := func(what string) {
		y.t.Fatalf("a matter was closed %s; last done: %v", what, y.did[max(0, len(y.did)-20):])
	}
	m, err := p.Matter(ctx, before.ID)
	if err != nil {
		y.t.Fatal(err)
	}
	if m.Closing == plant.WithdrawnBy {
		if !m.AllWithdrawn() {
			fail("as withdrawn with a line that stands")
		}
		return
	}
	var fix uuid.UUID
	var number int
	var since time.Time
	var person uuid.UUID
	if err := p.Pool().QueryRow(ctx, `select id, number, coalesce(restart_at, at), person_id from matter_fix where matter_id = $1 order by number desc limit 1`, m.ID).
		Scan(&fix, &number, &since, &person); err != nil {
		fail("without a fix")
	}
	for _, k := range before.Kinds {
		i := slices.IndexFunc(y.plans, func(p plant.ReactionPlan) bool { return p.ID == k.Plan })
		if i < 0 || !k.Stands {
			continue
		}
		plan := y.plans[i]
		for n, step := range plan.Steps {
			var last, remedies int
			var said string
			var value *float64
			// What another plan asks in the same words is the same step.
			err := p.Pool().QueryRow(ctx, `with asked as (select a.* from matter_answer a join reaction_plan r on r.id = a.plan_id
					where a.matter_id = $1 and a.attempt = $3 and (a.plan_id = $2 and a.step = $4 or a.plan_id <> $2 and r.steps->(a.step - 1)->>'says' = $5))
				select seq, said, value::float8, (select count(*) from asked where remedy) from asked where not remedy order by seq desc, at desc, id desc limit 1`,
				m.ID, plan.ID, number, n+1, step.Says).Scan(&last, &said, &value, &remedies)
			if err != nil {
				fail(fmt.Sprintf("without an answer to step %d of its plan", n+1))
			}
			off := said == "no" && !step.ExpectNo || said == "yes" && step.ExpectNo || said == "value" && *value > 5
			if off && step.IfNot != "" && remedies == 0 {
				fail("without what was to be done")
			}
		}
		if plan.Confirm {
			var rounds, signals int
			if err := p.Pool().QueryRow(ctx, `select (select count(*) from (select distinct on (taken_at, id) voided from subgroup where characteristic_id = $2 and taken_at >= $3
					order by taken_at, id, version desc) s where not voided),
				(select count(*) from signal where matter_id = $1 and taken_at >= $3 and not withdrawn)`, m.ID, y.c.ID, since).Scan(&rounds, &signals); err != nil {
				y.t.Fatal(err)
			}
			if rounds == 0 || signals > 0 {
				fail(fmt.Sprintf("with %d rounds and %d signals after the fix", rounds, signals))
			}
		}
		if plan.Verify {
			var by uuid.UUID
			var accepted bool
			if err := p.Pool().QueryRow(ctx, `select person_id, accepted from matter_verification where fix_id = $1`, fix).Scan(&by, &accepted); err != nil || !accepted || by == person {
				fail("without a second person")
			}
		}
	}
}

// lasting demands that no fact that was ever there is gone or another.
func (y *reactor) lasting() {
	rows, err := y.p.Pool().Query(context.Background(), `select md5(t::text) from matter_answer t union all select md5(t::text) from matter_fix t
		union all select md5(t::text) from matter_verification t union all select md5(t::text) from reaction_plan t union all select md5(t::text) from ledger t
		union all select md5(t::text) from subgroup t union all select md5((id, opened_at, opened_taken, opened_subgroup, alarmed)::text) from matter
		union all select md5(t::text) from matter t where closed_at is not null`)
	if err != nil {
		y.t.Fatal(err)
	}
	now, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil {
		y.t.Fatal(err)
	}
	seen := make(map[string]bool, len(now))
	for _, f := range now {
		seen[f] = true
	}
	for f := range y.facts {
		if !seen[f] {
			y.t.Fatalf("a fact is gone or another; last done: %v", y.did[max(0, len(y.did)-20):])
		}
	}
	y.facts = seen
}

// TestNoPathClosesAMatterWithoutWhatItsPlanDemands plays random histories of all that
// people may do.
func TestNoPathClosesAMatterWithoutWhatItsPlanDemands(t *testing.T) {
	t.Parallel()
	ends := make(chan map[plant.Closing]int, 3)
	t.Run("histories", func(t *testing.T) {
		for seed := range uint64(3) {
			t.Run(fmt.Sprint("seed ", seed), func(t *testing.T) {
				t.Parallel()
				p, _ := learned(t)
				y := &reactor{player: player{t: t, p: p, c: p.Diameter, rng: rand.New(rand.NewPCG(seed, 44)), frozen: 6}, kinds: map[string]uuid.UUID{}}
				counted := map[plant.Closing]int{}
				for i := range 300 {
					before := y.open()
					if i > 0 {
						p.Clock.Advance(time.Second)
					}
					if err := y.react(); err != nil {
						if _, ok := errors.AsType[*plant.Error](err); !ok {
							t.Fatalf("step %d (%s): %v", i, y.did[len(y.did)-1], err)
						}
					}
					after := y.open()
					if after != nil {
						y.kept(after)
					}
					if before != nil && (after == nil || after.ID != before.ID) {
						y.ended(before)
						m, err := p.Matter(context.Background(), before.ID)
						if err != nil {
							t.Fatal(err)
						}
						counted[m.Closing]++
					}
					if i%25 == 24 {
						y.lasting()
					}
				}
				consistent(t, p)
				ends <- counted
			})
		}
	})
	close(ends)
	sum := map[plant.Closing]int{}
	for c := range ends {
		for k, n := range c {
			sum[k] += n
		}
	}
	for _, c := range []plant.Closing{plant.Fixed, plant.NothingDone, plant.WithdrawnBy} {
		if sum[c] == 0 {
			t.Errorf("no history closed a matter as %q: %v", c, sum)
		}
	}
	t.Logf("closed: %v", sum)
}

func TestCausesAreAddedRenamedAndRetired(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	id := storetest.ID()
	if err := p.NewCause(ctx, plant.Cause{ID: id, Name: " Coolant low ", Family: "turning"}, p.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	offered := func() (names []string) {
		t.Helper()
		list, err := p.Causes(ctx, "turning")
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range list {
			names = append(names, c.Name)
		}
		return names
	}
	if got := fmt.Sprint(offered()); got != "[Insert chipped Swarf in collet Not found Coolant low]" {
		t.Errorf("offered: %s", got)
	}
	for _, tc := range []struct {
		what string
		err  error
		kind plant.Kind
	}{
		{"the same name", p.NewCause(ctx, plant.Cause{ID: storetest.ID(), Name: "Coolant low", Family: "turning"}, p.Engineer.ID), plant.Conflict},
		{"no name", p.NewCause(ctx, plant.Cause{ID: storetest.ID(), Name: " "}, p.Engineer.ID), plant.Invalid},
		{"no such family", p.NewCause(ctx, plant.Cause{ID: storetest.ID(), Name: "x", Family: "weaving"}, p.Engineer.ID), plant.NotFound},
		{"renamed to another's", p.RenameCause(ctx, id, "Insert chipped", p.Engineer.ID), plant.Conflict},
		{"no such cause", p.RenameCause(ctx, storetest.ID(), "x", p.Engineer.ID), plant.NotFound},
	} {
		if !plant.IsKind(tc.err, tc.kind) {
			t.Errorf("%s: %v", tc.what, tc.err)
		}
	}
	for _, err := range []error{p.RenameCause(ctx, id, "Coolant thin", p.Engineer.ID), p.RetireCause(ctx, id, true, p.Engineer.ID)} {
		if err != nil {
			t.Fatal(err)
		}
	}
	if slices.Contains(offered(), "Coolant thin") {
		t.Error("what is retired is offered")
	}
	if err := p.RetireCause(ctx, id, false, p.Engineer.ID); err != nil || !slices.Contains(offered(), "Coolant thin") {
		t.Errorf("what was put back is not offered: %v", err)
	}
	if all, err := p.AllCauses(ctx); err != nil || len(all) != 4 || all[3].Family != "turning" {
		t.Errorf("all: %+v, %v", all, err)
	}
	consistent(t, p)
}
