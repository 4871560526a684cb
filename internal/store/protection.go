package store

import (
	"context"
	"errors"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// onCharacteristic runs f while the characteristic is locked, seals the body that it
// returns (nil: nothing happened) and tells the boards.
func (s *Store) onCharacteristic(ctx context.Context, id uuid.UUID, f func(tx pgx.Tx, l *locked) (ledger.Body, error)) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	var station uuid.UUID
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, id)
		if err != nil {
			return err
		}
		body, err := f(tx, l)
		if err != nil || body == nil {
			return err
		}
		station = l.station
		b := &pgx.Batch{}
		if err := s.seal(b, l, body); err != nil {
			return err
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
	if err == nil && station != uuid.Nil {
		s.changed(station)
	}
	return err
}

// sentUnder looks for what is on record under an id. The same again is nothing to do;
// anything else under it is a conflict.
func sentUnder(ctx context.Context, tx pgx.Tx, sql string, args ...any) (done bool, err error) {
	var same bool
	switch err := tx.QueryRow(ctx, sql, args...).Scan(&same); {
	case errors.Is(err, pgx.ErrNoRows):
		return false, nil
	case err != nil:
		return false, fmt.Errorf("look for the same statement: %w", err)
	case !same:
		return false, plant.Conflictf("", "Another statement was sent under this number. Look at it again.")
	}
	return true, nil
}

// StateProtection records how product is protected.
func (s *Store) StateProtection(ctx context.Context, p plant.Protection) error {
	now := s.now()
	if err := p.Clean(now); err != nil {
		return err
	}
	err := s.onCharacteristic(ctx, p.Characteristic, func(tx pgx.Tx, l *locked) (ledger.Body, error) {
		done, err := sentUnder(ctx, tx, `select characteristic_id = $2 and method = $3 and instruction = $4 and decided_by = $5 and person_id = $6
			from protection where id = $1`, p.ID, l.id, string(p.Method), p.Instruction, p.DecidedBy, p.Person)
		if done || err != nil {
			return nil, err
		}
		if _, err := tx.Exec(ctx, `insert into protection (id, plant_id, characteristic_id, method, instruction, decided_by, from_at, recorded_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9)`, p.ID, s.plant(), l.id, string(p.Method), p.Instruction, p.DecidedBy, p.From, now, p.Person); err != nil {
			return nil, fmt.Errorf("insert protection: %w", err)
		}
		return ledger.Protection{Protection: p.ID, Method: string(p.Method), Instruction: p.Instruction, DecidedBy: p.DecidedBy,
			From: ledger.Time(p.From), At: ledger.Time(now), Person: ledger.ID(p.Person)}, nil
	})
	if err != nil {
		return fmt.Errorf("state a protection: %w", err)
	}
	return nil
}

// Accept records the mark "accepted". The caller has checked that the secret was entered
// again. Whether the figure allows it is decided under the lock, by the record as it is.
func (s *Store) Accept(ctx context.Context, a plant.Acceptance) error {
	now := s.now()
	if err := a.Clean(now); err != nil {
		return err
	}
	err := s.onCharacteristic(ctx, a.Characteristic, func(tx pgx.Tx, l *locked) (ledger.Body, error) {
		done, err := sentUnder(ctx, tx, `select characteristic_id = $2 and reason = $3 and until_at = $4 and person_id = $5 from acceptance where id = $1`,
			a.ID, l.id, a.Reason, a.Until, a.Person)
		if done || err != nil {
			return nil, err
		}
		if l.setupVersion != a.SetupVersion {
			return nil, plant.Conflictf("", "The set-up was changed meanwhile. Look at it again.")
		}
		r, err := s.ownerRecord(ctx, tx, l.id)
		if err != nil {
			return nil, err
		}
		rules := plant.DefaultSettings()
		if n := len(r.Settings); n > 0 {
			rules = r.Settings[n-1]
		}
		standing, _ := r.Fold()
		if err := standing.Allow(rules.Owner); err != nil {
			return nil, err
		}
		signature, err := s.signature(ctx, tx, a.Person, "accept")
		if err != nil {
			return nil, err
		}
		if _, err := tx.Exec(ctx, `insert into acceptance (id, plant_id, characteristic_id, setup_version, reason, told, until_at, accepted_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9)`, a.ID, s.plant(), l.id, a.SetupVersion, a.Reason, a.Told, a.Until, now, a.Person); err != nil {
			return nil, fmt.Errorf("insert acceptance: %w", err)
		}
		signature.At = ledger.Time(now)
		return ledger.Acceptance{Acceptance: a.ID, SetupVersion: a.SetupVersion, Reason: a.Reason, Told: a.Told, Until: ledger.Time(a.Until), Signature: signature}, nil
	})
	if err != nil {
		return fmt.Errorf("accept: %w", err)
	}
	return nil
}

// EndStatement ends a protection or an acceptance of a characteristic.
func (s *Store) EndStatement(ctx context.Context, characteristic uuid.UUID, e plant.Ending) error {
	now := s.now()
	if err := e.Clean(); err != nil {
		return err
	}
	err := s.onCharacteristic(ctx, characteristic, func(tx pgx.Tx, l *locked) (ledger.Body, error) {
		done, err := sentUnder(ctx, tx, `select of_id = $2 and characteristic_id = $3 and reason = $4 and person_id = $5 from ending where id = $1 and plant_id = $6`,
			e.ID, e.Of, l.id, e.Reason, e.Person, s.plant())
		if done || err != nil {
			return nil, err
		}
		var there, ended bool
		if err := tx.QueryRow(ctx, `select exists(select from protection where id = $1 and characteristic_id = $2)
				or exists(select from acceptance where id = $1 and characteristic_id = $2), exists(select from ending where of_id = $1)`, e.Of, l.id).Scan(&there, &ended); err != nil {
			return nil, fmt.Errorf("look for what is to end: %w", err)
		}
		switch {
		case !there:
			return nil, plant.NotFoundf("", "There is no such statement.")
		case ended:
			return nil, plant.Conflictf("", "Somebody has ended this already.")
		}
		if _, err := tx.Exec(ctx, `insert into ending (of_id, id, plant_id, characteristic_id, reason, ended_at, person_id) values ($1, $2, $3, $4, $5, $6, $7)`,
			e.Of, e.ID, s.plant(), l.id, e.Reason, now, e.Person); err != nil {
			return nil, fmt.Errorf("insert ending: %w", err)
		}
		return ledger.Ending{Ending: e.ID, Of: e.Of, Reason: e.Reason, At: ledger.Time(now), Person: ledger.ID(e.Person)}, nil
	})
	if err != nil {
		return fmt.Errorf("end a statement: %w", err)
	}
	return nil
}

// sealedOwner are the comparisons of protections, acceptances and their endings with
// what was sealed.
var sealedOwner = []string{
	`select e.chain, format('protection %s is not on record as it was sealed', b->>'protection')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'protection') e
	left join protection p on p.id = (b->>'protection')::uuid and p.characteristic_id = e.chain
	where p.id is null or p.method <> b->>'method' or p.instruction <> b->>'instruction' or p.decided_by <> b->>'decided_by'
		or p.from_at <> (b->>'from')::timestamptz or p.recorded_at <> (b->>'at')::timestamptz or p.person_id is distinct from (b->>'person')::uuid`,
	`select e.chain, format('acceptance %s is not on record as it was sealed', b->>'acceptance')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'acceptance') e
	left join acceptance a on a.id = (b->>'acceptance')::uuid and a.characteristic_id = e.chain
	where a.id is null or a.setup_version <> (b->>'setup_version')::int or a.reason <> b->>'reason' or a.told <> b->>'told'
		or a.until_at <> (b->>'until')::timestamptz or a.accepted_at <> (b->'signature'->>'at')::timestamptz
		or a.person_id is distinct from (b->'signature'->>'person')::uuid`,
	`select e.chain, format('the ending of %s is not on record as it was sealed', b->>'of')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'ending') e
	left join ending x on x.of_id = (b->>'of')::uuid and x.characteristic_id = e.chain
	where x.id is null or x.id <> (b->>'ending')::uuid or x.reason <> b->>'reason' or x.ended_at <> (b->>'at')::timestamptz
		or x.person_id is distinct from (b->>'person')::uuid`,
	`select c.id, format('%s protections, acceptances and endings are on record, %s were sealed', t.n, e.n) from characteristic c
	cross join lateral (select (select count(*) from protection where characteristic_id = c.id) + (select count(*) from acceptance where characteristic_id = c.id)
		+ (select count(*) from ending where characteristic_id = c.id) as n) t
	cross join lateral (select count(*) as n from ledger where chain = c.id and kind in ('protection', 'acceptance', 'ending')) e where t.n <> e.n`,
}
