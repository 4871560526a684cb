package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// plant is the id of the plant that this database holds; Nil before CreatePlant.
func (s *Store) plant() uuid.UUID {
	if id := s.plantID.Load(); id != nil {
		return *id
	}
	return uuid.Nil
}

func (s *Store) findPlant(ctx context.Context) error {
	var id uuid.UUID
	err := s.pool.QueryRow(ctx, `select id from plant order by created_at, id limit 1`).Scan(&id)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil
	}
	if err != nil {
		return fmt.Errorf("find plant: %w", err)
	}
	s.plantID.Store(&id)
	return nil
}

// Plant reads the plant; NotFound when the database is still empty.
func (s *Store) Plant(ctx context.Context) (plant.Plant, error) { return s.plantFrom(ctx, s.pool) }

func (s *Store) plantFrom(ctx context.Context, q querier) (plant.Plant, error) {
	var p plant.Plant
	var zone string
	var confirmed *time.Time
	err := q.QueryRow(ctx, `select id, name, time_zone, demo, confirmed_at from plant where id = $1`, s.plant()).
		Scan(&p.ID, &p.Name, &zone, &p.Demo, &confirmed)
	p.ConfirmedAt = orZero(confirmed)
	if err != nil {
		return p, missing(err, "No plant has been set up here yet.")
	}
	if p.Location, err = time.LoadLocation(zone); err != nil {
		return p, fmt.Errorf("time zone of the plant: %w", err)
	}
	rows, err := q.Query(ctx, `select id, name, extract(epoch from starts)::bigint from shift where plant_id = $1 and retired_at is null order by starts`, p.ID)
	if err != nil {
		return p, fmt.Errorf("read shifts: %w", err)
	}
	p.Shifts, err = pgx.CollectRows(rows, func(r pgx.CollectableRow) (plant.Shift, error) {
		var sh plant.Shift
		var seconds int64
		err := r.Scan(&sh.ID, &sh.Name, &seconds)
		sh.Starts = time.Duration(seconds) * time.Second
		return sh, err
	})
	if err != nil {
		return p, fmt.Errorf("read shifts: %w", err)
	}
	return p, nil
}

// CreatePlant makes the one plant of this database, with its shifts and the head of
// its ledger chain.
func (s *Store) CreatePlant(ctx context.Context, p plant.Plant) error {
	now := s.now()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		b := &pgx.Batch{}
		b.Queue(`insert into plant (id, name, time_zone, demo, created_at, confirmed_at) values ($1, $2, $3, $4, $5, $6)`,
			p.ID, p.Name, p.Location.String(), p.Demo, now, timeOrNull(p.ConfirmedAt))
		for _, sh := range p.Shifts {
			b.Queue(`insert into shift (id, plant_id, name, starts) values ($1, $2, $3, make_interval(secs => $4)::time)`,
				newID(), p.ID, sh.Name, sh.Starts.Seconds())
		}
		b.Queue(`insert into chain_head (chain, plant_id, seq, hash) values ($1, $1, 0, $2)`, p.ID, make([]byte, ledger.Size))
		return tx.SendBatch(ctx, b).Close()
	})
	if err != nil {
		return fmt.Errorf("create plant: %w", err)
	}
	s.plantID.Store(&p.ID)
	return s.arrange(ctx, "plant made", p.ID, uuid.Nil, map[string]any{"name": p.Name, "time_zone": p.Location.String()}, nil)
}

// arrange runs f and enters what was arranged into the plant's chain, in one
// transaction.
func (s *Store) arrange(ctx context.Context, what string, subject, person uuid.UUID, content map[string]any, f func(tx pgx.Tx) error) error {
	return s.inTx(ctx, func(tx pgx.Tx) error {
		if f != nil {
			if err := f(tx); err != nil {
				return err
			}
		}
		return s.appendPlantChain(ctx, tx, ledger.Arrangement{
			What: what, Subject: subject, At: ledger.Time(s.now()), Person: ledger.ID(person), Content: content,
		})
	})
}

// AddLine adds a lane.
func (s *Store) AddLine(ctx context.Context, l plant.Line, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { a.addLine(l); return nil })
}

// AddStation adds a station to a line.
func (s *Store) AddStation(ctx context.Context, st plant.Station, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { a.addStation(st); return nil })
}

// AddMachine adds a machine with its streams.
func (s *Store) AddMachine(ctx context.Context, m plant.Machine, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { a.addMachine(m); return nil })
}

// AddPart adds a part.
func (s *Store) AddPart(ctx context.Context, p plant.Part, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { a.addPart(p); return nil })
}

// Parts lists the parts that are made, by name.
func (s *Store) Parts(ctx context.Context) ([]plant.Part, error) {
	rows, err := s.pool.Query(ctx, `select id, name, family from part where plant_id = $1 and retired_at is null order by name`, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read parts: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (p plant.Part, err error) {
		return p, r.Scan(&p.ID, &p.Name, &p.Family)
	})
}

// AddGauge adds a gauge.
func (s *Store) AddGauge(ctx context.Context, g plant.Gauge, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { a.addGauge(g); return nil })
}

// AddCharacteristic adds a characteristic with the first version of its set-up.
func (s *Store) AddCharacteristic(ctx context.Context, c plant.Characteristic, setup plant.Setup, by uuid.UUID) error {
	err := s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { return a.addCharacteristic(c, setup) })
	if err != nil {
		return fmt.Errorf("add characteristic: %w", err)
	}
	return nil
}

func setupBody(id uuid.UUID, setup plant.Setup, by uuid.UUID) ledger.Setup {
	content := map[string]any{
		"unit": setup.Unit, "decimals": setup.Decimals, "chart": setup.Chart, "size": setup.Size, "worse": setup.Worse,
		"target": setup.Target, "lower": setup.Lower, "upper": setup.Upper, "plan": setup.Plan, "control_plan": setup.ControlPlan,
	}
	if setup.GaugeID != uuid.Nil {
		content["gauge"] = setup.GaugeID
	}
	return ledger.Setup{Characteristic: id, Version: setup.Version, At: ledger.Time(setup.MadeAt), Person: ledger.ID(by), Content: content}
}

func (s *Store) queueSetup(b *pgx.Batch, id uuid.UUID, v plant.Setup, by uuid.UUID) error {
	plan, err := json.Marshal(v.Plan)
	if err != nil {
		return fmt.Errorf("encode sampling plan: %w", err)
	}
	control, err := json.Marshal(v.ControlPlan)
	if err != nil {
		return fmt.Errorf("encode control plan: %w", err)
	}
	b.Queue(`insert into setup (characteristic_id, version, plant_id, unit, decimals, target, lower_spec, upper_spec,
			worse, chart, size, plan, control_plan, gauge_id, made_at, person_id)
		values ($1, $2, $3, $4, $5, $6::text::numeric, $7::text::numeric, $8::text::numeric, $9, $10, $11, $12, $13, $14, $15, $16)`,
		id, v.Version, s.plant(), v.Unit, v.Decimals, decimalOrNull(v.Target), decimalOrNull(v.Lower), decimalOrNull(v.Upper),
		string(v.Worse), string(v.Chart), v.Size, plan, control, orNull(v.GaugeID), v.MadeAt, orNull(by))
	return nil
}

const selectSetup = `select version, unit, decimals, target::text, lower_spec::text, upper_spec::text, worse, chart, size,
	plan, control_plan, gauge_id, made_at from setup`

func scanSetup(r pgx.CollectableRow) (plant.Setup, error) { return scanSetupOf(r) }

// scanSetupOf reads a set-up from a row that begins with the columns of before.
func scanSetupOf(r pgx.CollectableRow, before ...any) (plant.Setup, error) {
	var v plant.Setup
	var target, lower, upper *string
	var gauge *uuid.UUID
	var plan, control []byte
	err := r.Scan(append(before, &v.Version, &v.Unit, &v.Decimals, &target, &lower, &upper, &v.Worse, &v.Chart, &v.Size, &plan, &control, &gauge, &v.MadeAt)...)
	if err != nil {
		return v, err
	}
	v.GaugeID = orNil(gauge)
	return v, errors.Join(
		into(&v.Target, target), into(&v.Lower, lower), into(&v.Upper, upper),
		json.Unmarshal(plan, &v.Plan), json.Unmarshal(control, &v.ControlPlan))
}

func into(dst **plant.Decimal, text *string) error {
	d, err := decimalFrom(text)
	*dst = d
	return err
}

type setupKey struct {
	characteristic uuid.UUID
	version        int
}

// querier is what a pool, a connection and a transaction have in common.
type querier interface {
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
}

// setup reads one version of a set-up. Versions never change, so they are kept.
func (s *Store) setup(ctx context.Context, q querier, characteristic uuid.UUID, version int) (plant.Setup, error) {
	key := setupKey{characteristic, version}
	if v, ok := s.setups.Load(key); ok {
		return v.(plant.Setup), nil
	}
	rows, err := q.Query(ctx, selectSetup+` where characteristic_id = $1 and version = $2`, characteristic, version)
	if err != nil {
		return plant.Setup{}, fmt.Errorf("read set-up: %w", err)
	}
	v, err := pgx.CollectExactlyOneRow(rows, scanSetup)
	if err != nil {
		return v, fmt.Errorf("read set-up: %w", missing(err, "There is no such set-up."))
	}
	s.setups.Store(key, v)
	return v, nil
}
