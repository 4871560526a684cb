package escalation_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestAnyHistory lives through random histories: rounds, signals, corrections that take
// them back, takings, closings, quiets, time that passes, and two servers of which one
// looks now, the other then, and one is started anew.
func TestAnyHistory(t *testing.T) {
	t.Parallel()
	for seed := range uint64(4) {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			p := learned(t)
			servers := []*server{another(t, p), another(t, p)}
			rng := rand.New(rand.NewPCG(20260312, seed))
			var last plant.Answer
			var fired []string // rows of steps, as they were first seen
			for n := range 70 {
				something(t, p, rng, &last)
				s := servers[rng.IntN(2)]
				if n%20 == 19 {
					servers[0].store.Close()
					servers[0] = another(t, p)
					s = servers[0]
				}
				if rng.IntN(3) > 0 {
					s.look(t)
				}
				fired = facts(t, p, fired)
			}
			p.Clock.Advance(time.Second)
			servers[0].look(t)
			servers[1].look(t)
			states, err := p.StationStates(context.Background(), 0)
			if err != nil {
				t.Fatal(err)
			}
			if due := plant.CallsDue(states, p.Clock.Now()); len(due) > 0 {
				t.Errorf("%d steps are due and were not fired", len(due))
			}
			laws(t, p)
			whole(t, p)
			if len(fired) == 0 {
				t.Error("nothing ever escalated: the history is no test")
			}
		})
	}
}

// something happens at the plant.
func something(t *testing.T, p *storetest.Plant, rng *rand.Rand, last *plant.Answer) {
	t.Helper()
	ctx := context.Background()
	p.Clock.Advance(time.Duration(rng.IntN(25)+1) * time.Minute)
	var open *plant.Matter
	st, err := p.StationState(ctx, p.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range st.Characteristics {
		if c.Matter != nil {
			open = c.Matter
		}
	}
	switch k := rng.IntN(10); {
	case k < 2 || open == nil && k < 6:
		readings := [][]int64{calm, high, high, outside}[rng.IntN(4)]
		*last = p.MustRecord(t, p.Diameter, readings...)
	case k == 2 && last.Round != [16]byte{}:
		part := last.Parts[0]
		_, err := p.Correct(ctx, plant.Correction{Characteristic: p.Diameter.ID, Subgroup: part.Subgroup, TakenAt: last.TakenAt, Replaces: 1,
			Readings: calm, Reason: "typing slip", Person: p.Operator.ID})
		if err != nil && !plant.IsKind(err, plant.Conflict) {
			t.Fatal(err)
		}
	case k == 3 && open != nil && open.TakenAt.IsZero():
		take(t, p, open.ID)
	case k == 4 && open != nil:
		err := p.CloseMatter(ctx, plant.ClosingRequest{Matter: open.ID, Version: open.Version, Cause: "Not found", Action: "Insert changed", Person: p.Operator.ID})
		if err != nil {
			t.Fatal(err)
		}
	case k < 8 && open != nil && open.TakenAt.IsZero():
		d := time.Duration(rng.IntN(120)) * time.Minute
		if err := quiet(t, p, open.ID, d); err != nil && !plant.IsKind(err, plant.Conflict) && !plant.IsKind(err, plant.Invalid) {
			t.Fatal(err)
		}
	}
}

// facts demands that every step seen before is there as it was.
func facts(t *testing.T, p *storetest.Plant, before []string) []string {
	t.Helper()
	rows, err := p.Pool().Query(context.Background(), `select x::text from escalation_step x order by x.id`)
	if err != nil {
		t.Fatal(err)
	}
	now, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil {
		t.Fatal(err)
	}
	there := map[string]bool{}
	for _, row := range now {
		there[row] = true
	}
	for _, row := range before {
		if !there[row] {
			t.Errorf("a fired step has changed or is gone: %s", row)
		}
	}
	return now
}

// laws are what holds of every step that was fired.
func laws(t *testing.T, p *storetest.Plant) {
	t.Helper()
	for law, sql := range map[string]string{
		"nothing is fired after it was taken or closed": `select count(*) from escalation_step x join matter m on m.id = x.matter_id
			where x.fired_at > m.taken_at or x.fired_at > m.closed_at`,
		"nothing is fired while it is quiet": `select count(*) from escalation_step x join quieting q on q.matter_id = x.matter_id and q.kind = x.kind
			where x.fired_at >= q.at and x.fired_at < q.until
			and not exists (select from quieting n where n.matter_id = q.matter_id and n.at > q.at and n.at <= x.fired_at)`,
		"steps come in their order": `select count(*) from escalation_step a join escalation_step b on a.matter_id is not distinct from b.matter_id
			and a.overdue_id is not distinct from b.overdue_id and a.turn = b.turn and a.step < b.step and a.fired_at > b.fired_at`,
		"none is skipped": `select count(*) from escalation_step a where a.step > 1 and not exists (select from escalation_step b
			where b.matter_id is not distinct from a.matter_id and b.overdue_id is not distinct from a.overdue_id and b.turn = a.turn and b.step = a.step - 1)`,
		"none comes early": `select count(*) from escalation_step x join matter m on m.id = x.matter_id
			where x.fired_at < m.opened_at + make_interval(mins => case x.kind when 'hold' then 5 else 10 end * case x.step when 1 then 1 when 2 then 2 else 4 end)`,
		"a turn is a quiet": `select count(*) from escalation_step x where x.matter_id is not null
			and x.turn <> (select count(*) from quieting q where q.matter_id = x.matter_id and q.at <= x.fired_at)`,
		"each fires once": `select count(*) from (select from escalation_step group by matter_id, overdue_id, turn, step having count(*) > 1) twice`,
		"each of the last steps sends to each target once": `select count(*) from escalation_step x
			where (select count(*) from outbox o where o.step_id = x.id) <> case x.step when 3 then 2 else 0 end`,
	} {
		if n := count(t, p, sql); n != 0 {
			t.Errorf("%s: broken %d times", law, n)
		}
	}
}
