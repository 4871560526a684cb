package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// ownerColumns are what a characteristic c carries for the routing of its owner, each as
// one JSON value, so that reading them costs no further question.
const ownerColumns = `(select standing from owner_standing o where o.characteristic_id = c.id),
	(select ` + acceptanceJSON + ` where a.characteristic_id = c.id order by a.accepted_at desc, a.id desc limit 1),
	(select jsonb_agg(x.v order by x.from_at, x.id) from (select p.from_at, p.id, ` + protectionJSON + ` where p.characteristic_id = c.id and e.of_id is null) x (from_at, id, v))`

const acceptanceJSON = `jsonb_build_object('id', a.id, 'setup', a.setup_version, 'lower', u.lower_spec::text, 'upper', u.upper_spec::text, 'text', a.reason,
		'told', a.told, 'until', a.until_at, 'at', a.accepted_at, 'person', a.person_id, 'name', n.name, ` + endingJSON + `)
	from acceptance a join person n on n.id = a.person_id
	join setup u on u.characteristic_id = a.characteristic_id and u.version = a.setup_version
	left join ending e on e.of_id = a.id left join person en on en.id = e.person_id`

const protectionJSON = `jsonb_build_object('id', p.id, 'method', p.method, 'text', p.instruction, 'decided_by', p.decided_by, 'from', p.from_at,
		'at', p.recorded_at, 'person', p.person_id, 'name', n.name, ` + endingJSON + `)
	from protection p join person n on n.id = p.person_id
	left join ending e on e.of_id = p.id left join person en on en.id = e.person_id`

const endingJSON = `'end', case when e.of_id is not null then
	jsonb_build_object('id', e.id, 'text', e.reason, 'at', e.ended_at, 'person', e.person_id, 'name', en.name) end`

// markRow is an acceptance or a protection as the database writes it.
type markRow struct {
	ID        uuid.UUID `json:"id"`
	Setup     int       `json:"setup"`
	Lower     *string   `json:"lower"`
	Upper     *string   `json:"upper"`
	Method    string    `json:"method"`
	Text      string    `json:"text"`
	Told      string    `json:"told"`
	DecidedBy string    `json:"decided_by"`
	From      time.Time `json:"from"`
	Until     time.Time `json:"until"`
	At        time.Time `json:"at"`
	Person    uuid.UUID `json:"person"`
	Name      string    `json:"name"`
	End       *markRow  `json:"end"`
}

func (m *markRow) ending() plant.Ending {
	if m.End == nil {
		return plant.Ending{}
	}
	e := m.End
	return plant.Ending{ID: e.ID, Of: m.ID, Reason: e.Text, Person: e.Person, PersonName: e.Name, At: e.At.UTC()}
}

func (m *markRow) acceptance(of uuid.UUID) (plant.Acceptance, error) {
	if m == nil {
		return plant.Acceptance{}, nil
	}
	a := plant.Acceptance{ID: m.ID, Characteristic: of, SetupVersion: m.Setup, Reason: m.Text, Told: m.Told, Until: m.Until.UTC(),
		Person: m.Person, PersonName: m.Name, AcceptedAt: m.At.UTC(), End: m.ending()}
	var err error
	if a.Lower, err = decimalFrom(m.Lower); err != nil {
		return a, err
	}
	a.Upper, err = decimalFrom(m.Upper)
	return a, err
}

func (m *markRow) protection(of uuid.UUID) plant.Protection {
	return plant.Protection{ID: m.ID, Characteristic: of, Method: plant.ProtectionMethod(m.Method), Instruction: m.Text, DecidedBy: m.DecidedBy,
		From: m.From.UTC(), Person: m.Person, PersonName: m.Name, RecordedAt: m.At.UTC(), End: m.ending()}
}

// ownerRow is where ownerColumns are read into.
type ownerRow struct {
	standing    *plant.Standing
	acceptance  *markRow
	protections []markRow
}

func (o *ownerRow) targets() []any { return []any{&o.standing, &o.acceptance, &o.protections} }

// into fills what routing looks at, and clears the row for the next.
func (o *ownerRow) into(c *plant.CharacteristicState, rules plant.OwnerSettings, now time.Time) error {
	c.ReadAt, c.Rules = now, rules
	if o.standing != nil {
		c.Standing = *o.standing
	}
	var err error
	if c.Acceptance, err = o.acceptance.acceptance(c.ID); err != nil {
		return err
	}
	for i := range o.protections {
		c.Protections = append(c.Protections, o.protections[i].protection(c.ID))
	}
	*o = ownerRow{}
	return nil
}

// Protections lists every protection of a characteristic, newest first.
func (s *Store) Protections(ctx context.Context, characteristic uuid.UUID) ([]plant.Protection, error) {
	list, err := s.marks(ctx, s.pool, `select `+protectionJSON+` where p.characteristic_id = $1 order by p.from_at desc, p.id desc`, characteristic)
	if err != nil {
		return nil, fmt.Errorf("read protections: %w", err)
	}
	out := make([]plant.Protection, len(list))
	for i := range list {
		out[i] = list[i].protection(characteristic)
	}
	return out, nil
}

// Acceptances lists every acceptance of a characteristic, newest first.
func (s *Store) Acceptances(ctx context.Context, characteristic uuid.UUID) ([]plant.Acceptance, error) {
	return s.acceptances(ctx, s.pool, characteristic)
}

func (s *Store) acceptances(ctx context.Context, q querier, characteristic uuid.UUID) ([]plant.Acceptance, error) {
	list, err := s.marks(ctx, q, `select `+acceptanceJSON+` where a.characteristic_id = $1 order by a.accepted_at desc, a.id desc`, characteristic)
	if err != nil {
		return nil, fmt.Errorf("read acceptances: %w", err)
	}
	out := make([]plant.Acceptance, len(list))
	for i := range list {
		if out[i], err = list[i].acceptance(characteristic); err != nil {
			return nil, err
		}
	}
	return out, nil
}

func (s *Store) marks(ctx context.Context, q querier, sql string, args ...any) ([]markRow, error) {
	rows, err := q.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowTo[markRow])
}
