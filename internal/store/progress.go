package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// What people did about matters, and the kinds and plans that their lines added. One
// batch reads it for all that are asked about.
const (
	selectKinds = `select g.matter_id, g.panel, g.side, g.plan_id, greatest(min(coalesce(g.added_at, g.judged_at)), m.opened_at), bool_or(not g.withdrawn)
		from signal g join matter m on m.id = g.matter_id where g.matter_id = any($1)
		group by g.matter_id, g.panel, g.side, g.plan_id, m.opened_at`
	selectAnswers = `select a.id, a.matter_id, a.plan_id, a.attempt, a.step, a.remedy, a.seq, a.said, a.value::text, a.note, a.person_id, coalesce(n.name, ''), a.at
		from matter_answer a left join person n on n.id = a.person_id where a.matter_id = any($1) order by a.at, a.id`
	// A fix is followed by subgroups until the next fix.
	selectFixes = `select f.matter_id, f.id, f.number, f.cause, f.cause_id, f.action, f.restart_at, f.at, f.person_id, coalesce(n.name, ''),
			round.taken_at, signal.taken_at, v.id, v.accepted, v.note, v.person_id, coalesce(vn.name, ''), v.at
		from (select *, coalesce(restart_at, at) as since, lead(coalesce(restart_at, at)) over (partition by matter_id order by number) as until
			from matter_fix where matter_id = any($1)) f
		join matter m on m.id = f.matter_id
		left join person n on n.id = f.person_id
		left join matter_verification v on v.fix_id = f.id left join person vn on vn.id = v.person_id
		left join lateral (select s.taken_at from (select distinct on (x.taken_at, x.id) x.taken_at, x.id, x.voided from subgroup x
				where x.characteristic_id = m.characteristic_id and x.taken_at >= f.since and (f.until is null or x.taken_at < f.until)
				order by x.taken_at, x.id, x.version desc) s where not s.voided limit 1) round on true
		left join lateral (select min(g.taken_at) as taken_at from signal g
			where g.matter_id = f.matter_id and not g.withdrawn and g.taken_at >= f.since and (f.until is null or g.taken_at < f.until)) signal on true
		order by f.matter_id, f.number`
	selectMatterPlans = `select ` + planColumns + ` from reaction_plan p left join person n on n.id = p.person_id where p.id in (
		select plan_id from signal where matter_id = any($1) union select plan_id from matter_answer where matter_id = any($1))`
)

// progress reads into matters what their Progress is worked out from.
func (s *Store) progress(ctx context.Context, q interface {
	SendBatch(ctx context.Context, b *pgx.Batch) pgx.BatchResults
}, matters ...*plant.Matter) error {
	if len(matters) == 0 {
		return nil
	}
	byID, ids := make(map[uuid.UUID]*plant.Matter, len(matters)), make([]uuid.UUID, len(matters))
	for i, m := range matters {
		byID[m.ID], ids[i] = m, m.ID
	}
	b := &pgx.Batch{}
	for _, sql := range []string{selectKinds, selectAnswers, selectFixes, selectMatterPlans} {
		b.Queue(sql, ids)
	}
	results := q.SendBatch(ctx, b)
	defer results.Close()
	for _, read := range []func(pgx.Rows, map[uuid.UUID]*plant.Matter) error{readKinds, readAnswers, readFixes, readMatterPlans} {
		rows, _ := results.Query() // an error shows when the rows are read
		if err := read(rows, byID); err != nil {
			return fmt.Errorf("read progress of matters: %w", err)
		}
	}
	return results.Close()
}

func readKinds(rows pgx.Rows, matters map[uuid.UUID]*plant.Matter) error {
	var id uuid.UUID
	var f plant.Firing
	var plan *uuid.UUID
	var at time.Time
	var stands bool
	found := map[uuid.UUID][]plant.KindAdded{}
	_, err := pgx.ForEachRow(rows, []any{&id, &f.Panel, &f.Side, &plan, &at, &stands}, func() error {
		found[id] = append(found[id], plant.KindAdded{Kind: f.MatterKind(), Plan: orNil(plan), AddedAt: at, Stands: stands})
		return nil
	})
	for id, kinds := range found {
		matters[id].Kinds = plant.MergeKinds(kinds)
	}
	return err
}

func readAnswers(rows pgx.Rows, matters map[uuid.UUID]*plant.Matter) error {
	var a plant.StepAnswer
	var value *string
	_, err := pgx.ForEachRow(rows, []any{&a.ID, &a.Matter, &a.Plan, &a.Attempt, &a.Step, &a.Remedy, &a.Seq, &a.Said, &value, &a.Note, &a.Person, &a.PersonName, &a.At}, func() error {
		v := a
		var err error
		v.Value, err = decimalFrom(value)
		matters[v.Matter].Answers = append(matters[v.Matter].Answers, v)
		return err
	})
	return err
}

func readFixes(rows pgx.Rows, matters map[uuid.UUID]*plant.Matter) error {
	var id uuid.UUID
	var f plant.Fix
	var cause, check, checker *uuid.UUID
	var restart, round, signal, checkedAt *time.Time
	var accepted *bool
	var note *string
	var checkerName string
	_, err := pgx.ForEachRow(rows, []any{&id, &f.ID, &f.Number, &f.Cause, &cause, &f.Action, &restart, &f.At, &f.Person, &f.PersonName,
		&round, &signal, &check, &accepted, &note, &checker, &checkerName, &checkedAt}, func() error {
		v := f
		v.CauseID, v.RestartAt, v.ConfirmedAt, v.SignalAt = orNil(cause), orZero(restart), orZero(round), orZero(signal)
		if check != nil {
			v.Word = &plant.Verification{ID: *check, Fix: v.ID, Accepted: *accepted, Note: *note, Person: orNil(checker), PersonName: checkerName, At: orZero(checkedAt)}
		}
		matters[id].Fixes = append(matters[id].Fixes, v)
		return nil
	})
	return err
}

func readMatterPlans(rows pgx.Rows, matters map[uuid.UUID]*plant.Matter) error {
	plans, err := pgx.CollectRows(rows, onlyPlan)
	if err != nil {
		return err
	}
	byID := make(map[uuid.UUID]plant.ReactionPlan, len(plans))
	for _, p := range plans {
		byID[p.ID] = p
	}
	for _, m := range matters {
		m.Plans = byID // shared: nobody changes it
	}
	return nil
}
