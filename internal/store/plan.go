package store

import (
	"context"
	"encoding/json"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// plansInForce is a query for the plans about one kind that are in force for a
// characteristic, the narrowest first: its own, that of its station's family, the plant's.
func plansInForce(characteristic, kind, plantID string) string {
	return `select * from (select distinct on (x.characteristic_id is null, x.family = '') x.* from reaction_plan x
			where x.plant_id = ` + plantID + `::uuid and x.kind = ` + kind + `::text and (x.characteristic_id = ` + characteristic + `::uuid or x.characteristic_id is null
				and x.family in ('', (select t.family from characteristic c join station t on t.id = c.station_id where c.id = ` + characteristic + `::uuid)))
			order by x.characteristic_id is null, x.family = '', x.version desc) newest
		where not newest.withdrawn order by newest.characteristic_id is null, newest.family = ''`
}

const planColumns = `p.id, p.characteristic_id, p.family, p.kind, p.version, p.withdrawn, p.steps, p.confirm, p.verify, p.made_at, p.person_id, coalesce(n.name, '')`

func onlyPlan(r pgx.CollectableRow) (plant.ReactionPlan, error) { return scanPlan(r) }

// scanPlan reads a plan behind the columns that before takes.
func scanPlan(r pgx.CollectableRow, before ...any) (p plant.ReactionPlan, err error) {
	var characteristic, person *uuid.UUID
	var steps []byte
	if err = r.Scan(append(before, &p.ID, &characteristic, &p.Scope.Family, &p.Kind, &p.Version, &p.Withdrawn, &steps, &p.Confirm, &p.Verify,
		&p.MadeAt, &person, &p.PersonName)...); err != nil {
		return p, err
	}
	p.Scope.Characteristic, p.Person = orNil(characteristic), orNil(person)
	if err = json.Unmarshal(steps, &p.Steps); err != nil {
		return p, fmt.Errorf("read steps of plan %s: %w", p.ID, err)
	}
	return p, nil
}

func (s *Store) readPlans(ctx context.Context, q querier, sql string, args ...any) ([]plant.ReactionPlan, error) {
	rows, err := q.Query(ctx, sql, args...)
	if err != nil {
		return nil, fmt.Errorf("read reaction plans: %w", err)
	}
	plans, err := pgx.CollectRows(rows, onlyPlan)
	if err != nil {
		return nil, fmt.Errorf("read reaction plans: %w", err)
	}
	return plans, nil
}

// SavePlan adds a version of a reaction plan and seals it in the plant's chain. p.Version
// is the one that the person saw, 0 for none; when another was quicker it is a Conflict.
// What is open keeps the version that was in force when it was added.
func (s *Store) SavePlan(ctx context.Context, p plant.ReactionPlan) (plant.ReactionPlan, error) {
	p = p.Clean()
	if err := p.Validate(); err != nil {
		return p, err
	}
	steps, err := json.Marshal(p.Steps)
	if err != nil {
		return p, fmt.Errorf("encode steps: %w", err)
	}
	p.ID, p.MadeAt, p.Version = newID(), s.now(), p.Version+1
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		if err := s.scopeExists(ctx, tx, p.Scope); err != nil {
			return err
		}
		var newest int
		if err := tx.QueryRow(ctx, `select coalesce(max(version), 0) from reaction_plan where plant_id = $1 and kind = $2 and family = $3
			and characteristic_id is not distinct from $4`, s.plant(), string(p.Kind), p.Scope.Family, orNull(p.Scope.Characteristic)).Scan(&newest); err != nil {
			return fmt.Errorf("read newest version: %w", err)
		}
		if newest != p.Version-1 {
			return errPlanMoved
		}
		if p.Withdrawn && newest == 0 {
			return plant.Invalidf("steps", "There is no plan of its own here that could be withdrawn.")
		}
		if _, err := tx.Exec(ctx, `insert into reaction_plan (id, plant_id, characteristic_id, family, kind, version, withdrawn, steps, confirm, verify, made_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)`,
			p.ID, s.plant(), orNull(p.Scope.Characteristic), p.Scope.Family, string(p.Kind), p.Version, p.Withdrawn, steps, p.Confirm, p.Verify,
			p.MadeAt, orNull(p.Person)); err != nil {
			if violates(err, "reaction_plan_version_once") {
				return errPlanMoved
			}
			return fmt.Errorf("insert plan: %w", err)
		}
		return s.appendPlantChain(ctx, tx, planBody(p))
	})
	if err != nil {
		return p, fmt.Errorf("save reaction plan: %w", err)
	}
	return p, nil
}

var errPlanMoved = plant.Conflictf("", "Somebody has changed this plan meanwhile. Look at it again.")

func (s *Store) scopeExists(ctx context.Context, q querier, scope plant.PlanScope) error {
	var there bool
	if err := q.QueryRow(ctx, `select ($2::uuid is null or exists (select from characteristic where id = $2 and plant_id = $1))
		and ($3 = '' or exists (select from station where family = $3 and plant_id = $1))`, s.plant(), orNull(scope.Characteristic), scope.Family).Scan(&there); err != nil {
		return fmt.Errorf("look for what the plan is for: %w", err)
	}
	if !there {
		return plant.NotFoundf("", "There is nothing that this plan could be for.")
	}
	return nil
}

func planBody(p plant.ReactionPlan) ledger.ReactionPlan {
	body := ledger.ReactionPlan{Plan: p.ID, Characteristic: ledger.ID(p.Scope.Characteristic), Family: p.Scope.Family, About: string(p.Kind), Version: p.Version,
		Withdrawn: p.Withdrawn, Steps: []any{}, Confirm: p.Confirm, Verify: p.Verify, At: ledger.Time(p.MadeAt), Person: ledger.ID(p.Person)}
	for _, st := range p.Steps {
		body.Steps = append(body.Steps, st)
	}
	return body
}

// Plans lists the newest version of every reaction plan, also of those that were
// withdrawn.
func (s *Store) Plans(ctx context.Context) ([]plant.ReactionPlan, error) {
	return s.readPlans(ctx, s.pool, `select `+planColumns+` from (select distinct on (kind, family, characteristic_id) * from reaction_plan where plant_id = $1
		order by kind, family, characteristic_id, version desc) p left join person n on n.id = p.person_id order by p.kind, p.family, p.characteristic_id`, s.plant())
}

// PlanVersions lists the versions of one plan, the newest first.
func (s *Store) PlanVersions(ctx context.Context, scope plant.PlanScope, kind plant.MatterKind) ([]plant.ReactionPlan, error) {
	return s.readPlans(ctx, s.pool, `select `+planColumns+` from reaction_plan p left join person n on n.id = p.person_id
		where p.plant_id = $1 and p.kind = $2 and p.family = $3 and p.characteristic_id is not distinct from $4 order by p.version desc`,
		s.plant(), string(kind), scope.Family, orNull(scope.Characteristic))
}

// PlanInForce reads the plan that counts for a characteristic now, the narrowest that
// there is; nil when there is none.
func (s *Store) PlanInForce(ctx context.Context, characteristic uuid.UUID, kind plant.MatterKind) (*plant.ReactionPlan, error) {
	plans, err := s.readPlans(ctx, s.pool, `select `+planColumns+` from (`+plansInForce("$1", "$2", "$3")+` limit 1) p left join person n on n.id = p.person_id`,
		characteristic, string(kind), s.plant())
	if err != nil || len(plans) == 0 {
		return nil, err
	}
	return &plans[0], nil
}

// overduePlans adds the plans that count while a round is overdue, where one is.
func (g *gathering) overduePlans(ctx context.Context, tx pgx.Tx) error {
	var late []uuid.UUID
	for id, c := range g.characteristics {
		if c.Due.State >= plant.Late {
			late = append(late, id)
		}
	}
	if len(late) == 0 {
		return nil
	}
	rows, err := tx.Query(ctx, `select l.id, `+planColumns+` from unnest($1::uuid[]) l (id) cross join lateral (`+plansInForce("l.id", "$2", "$3")+` limit 1) p
		left join person n on n.id = p.person_id`, late, string(plant.MatterOverdue), g.s.plant())
	if err != nil {
		return fmt.Errorf("read plans for overdue rounds: %w", err)
	}
	var of uuid.UUID
	_, err = pgx.CollectRows(rows, func(r pgx.CollectableRow) (p plant.ReactionPlan, err error) {
		if p, err = scanPlan(r, &of); err == nil {
			g.characteristics[of].OverduePlan = &p
		}
		return p, err
	})
	if err != nil {
		return fmt.Errorf("read plans for overdue rounds: %w", err)
	}
	return nil
}
