package store

import (
	"context"
	"fmt"
	"slices"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
)

// sealed are the comparisons of tables with what was sealed about their rows. Each gives
// the characteristic, machine or plant and says in words what differs.
var sealed = []string{
	// Every entry about a subgroup has its row, as it was entered.
	`select e.chain, format('subgroup %s, version %s, is not on record as it was sealed', b->>'subgroup', b->>'version')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'subgroup') e
	left join subgroup s on s.characteristic_id = e.chain and s.taken_at = (b->>'taken_at')::timestamptz
		and s.id = (b->>'subgroup')::uuid and s.version = (b->>'version')::int
	where s.id is null or to_jsonb(s.readings) is distinct from b->'readings' or s.decimals <> (b->>'decimals')::int
		or s.setup_version <> (b->>'setup_version')::int or s.round_id <> (b->>'round')::uuid or s.voided <> coalesce((b->>'voided')::boolean, false)
		or s.recorded_at <> (b->>'recorded_at')::timestamptz or s.person_id is distinct from (b->>'person')::uuid
		or to_jsonb(s.keyed_by) is distinct from b->'keyed_by' or to_jsonb(s.streams) is distinct from b->'streams' or s.retyped is distinct from b->'retyped'
		or s.machine_id <> (b->>'machine')::uuid or s.part_id is distinct from (b->>'part')::uuid or s.lot <> coalesce(b->>'lot', '')
		or s.gauge_id is distinct from (b->>'gauge')::uuid or s.short_reason <> coalesce(b->>'short_reason', '') or s.reason <> coalesce(b->>'reason', '')`,
	// And nothing is there besides.
	`select c.id, format('%s versions of subgroups are on record, %s were sealed', s.n, e.n) from characteristic c
	cross join lateral (select count(*) as n from subgroup where characteristic_id = c.id) s
	cross join lateral (select count(*) as n from ledger where chain = c.id and kind = 'subgroup') e where s.n <> e.n`,
	// The round of each first version is the visit that was sealed, by the device and in the
	// way that it came. A correction is no visit of its own.
	`select e.chain, format('round %s is not on record as it was sealed', b->>'round')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'subgroup') e
	left join round r on r.id = (b->>'round')::uuid
	where b->>'version' = '1' and (r.id is null or r.station_id <> (b->>'station')::uuid or r.taken_at <> (b->>'taken_at')::timestamptz
		or r.taken_raw <> (b->>'taken_raw')::timestamptz or r.skew_ms <> (b->>'skew_ms')::bigint or r.recorded_at <> (b->>'recorded_at')::timestamptz
		or r.source <> b->>'source' or r.device_id is distinct from (b->>'device')::uuid or r.person_id is distinct from (b->>'person')::uuid)`,
	`select s.characteristic_id, format('subgroup %s is on record for another round than was sealed', s.id) from subgroup s
	left join round r on r.id = s.round_id where r.id is null`,
	`select r.station_id, format('round %s holds nothing that was sealed', r.id) from round r
	where not exists (select from subgroup s where s.round_id = r.id)`,
	// What was computed when a subgroup was entered follows from its readings.
	`select s.characteristic_id, format('the statistics of subgroup %s, version %s, are not those of its readings', s.id, s.version)
	from subgroup s join setup u on u.characteristic_id = s.characteristic_id and u.version = s.setup_version
	cross join lateral (select sum(x) as sum, max(x) - min(x) as range, coalesce(stddev_samp(x), 0)::float8 / 10 ^ s.decimals as sd,
		count(*) filter (where x > u.upper_spec * 10 ^ s.decimals::numeric or x < u.lower_spec * 10 ^ s.decimals::numeric) as outside from unnest(s.readings) x) v
	where v.sum <> s.reading_sum or v.range <> s.reading_range or v.outside <> s.outside or abs(v.sd - s.reading_sd) > 1e-9 * v.sd`,
	`select e.chain, format('revision %s is not on record as it was sealed', b->>'number')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'revision') e
	left join revision r on r.id = (b->>'revision')::uuid and r.characteristic_id = e.chain
	where r.id is null or r.number <> (b->>'number')::int or r.setup_version <> (b->>'setup_version')::int or r.chart <> b->>'chart'
		or r.estimator <> b->>'estimator' or r.center <> (b->>'center')::float8 or r.sigma <> (b->>'sigma')::float8 or r.multiple <> (b->>'multiple')::float8
		or r.reason <> b->>'reason' or r.in_force_from <> (b->>'in_force_from')::timestamptz or (r.basis->>'subgroups')::int <> (b->>'basis_subgroups')::int
		or r.author_id is distinct from (b->'signature'->>'person')::uuid
		or coalesce(nullif(r.rules->'location', 'null'), '[]') <> (select coalesce(jsonb_agg(x::jsonb), '[]') from jsonb_array_elements_text(b->'location') x)
		or coalesce(nullif(r.rules->'dispersion', 'null'), '[]') <> (select coalesce(jsonb_agg(x::jsonb), '[]') from jsonb_array_elements_text(b->'dispersion') x)
		or not exists (select from boundary where characteristic_id = e.chain and kind = 'revision' and revision_id = r.id and at = r.in_force_from)`,
	`select r.characteristic_id, format('revision %s was never sealed', r.number) from revision r
	left join (select chain, (convert_from(body, 'UTF8')::jsonb->>'revision')::uuid as id from ledger where kind = 'revision') e
		on e.id = r.id and e.chain = r.characteristic_id where e.id is null`,
	`select e.chain, format('set-up %s is not on record as it was sealed', b->>'version')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'setup') e
	left join setup u on u.characteristic_id = e.chain and u.version = (b->>'version')::int
	where u.version is null or u.unit <> b->'content'->>'unit' or u.decimals <> (b->'content'->>'decimals')::int or u.size <> (b->'content'->>'size')::int
		or u.chart <> b->'content'->>'chart' or u.worse <> b->'content'->>'worse' or u.target is distinct from (b->'content'->>'target')::numeric
		or u.lower_spec is distinct from (b->'content'->>'lower')::numeric or u.upper_spec is distinct from (b->'content'->>'upper')::numeric
		or u.plan <> b->'content'->'plan' or u.control_plan <> b->'content'->'control_plan' or u.made_at <> (b->>'at')::timestamptz`,
	`select e.chain, format('matter %s is not on record as it was %s', b->>'matter', b->>'step')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter') e
	left join matter m on m.id = (b->>'matter')::uuid and m.characteristic_id = e.chain
	where m.id is null
		or b->>'step' = 'opened' and (m.opened_at <> (b->>'at')::timestamptz or m.opened_subgroup <> (b->>'subgroup')::uuid)
		or b->>'step' = 'closed' and (m.closed_at is distinct from (b->>'at')::timestamptz or m.closed_by is distinct from (b->>'person')::uuid
			or m.cause <> coalesce(b->>'cause', '') or m.action <> coalesce(b->>'action', '') or m.closing <> b->>'closing'
			or m.restart_at is distinct from (b->>'restart_at')::timestamptz
			or m.restart_at is not null and not exists (select from boundary where characteristic_id = e.chain and kind = 'restart' and at = m.restart_at))`,
	`select m.characteristic_id, format('matter %s was never closed, says the ledger', m.id) from matter m
	left join (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter') e
		on (b->>'matter')::uuid = m.id and e.chain = m.characteristic_id and b->>'step' = 'closed' where m.closed_at is not null and e.chain is null`,
	// A boundary follows from something that was sealed.
	`select b.characteristic_id, format('nothing that was sealed makes a boundary (%s) at %s', b.kind, b.at) from boundary b
	where b.kind = 'revision' and not exists (select from revision r where r.id = b.revision_id and r.in_force_from = b.at)
		or b.kind = 'restart' and not exists (select from matter m left join matter_fix f on f.matter_id = m.id
			where m.characteristic_id = b.characteristic_id and b.at in (m.restart_at, f.restart_at))
		or b.kind = 'changeover' and not exists (select from machine_state x join characteristic c on c.machine_id = x.machine_id
			where c.id = b.characteristic_id and x.at = b.at)
		or b.kind = 'setup' and not exists (select from setup u where u.characteristic_id = b.characteristic_id and u.made_at <= b.at and u.made_at = b.recorded_at)`,
	`select (b->>'machine')::uuid, format('change %s is not on record as it was sealed', b->>'change')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'change') e left join change h on h.id = (b->>'change')::uuid
	where h.id is null or h.machine_id <> (b->>'machine')::uuid or h.characteristic_id is distinct from (b->>'characteristic')::uuid or h.kind <> b->>'what'
		or h.size is distinct from (b->>'size')::numeric or h.note <> coalesce(b->>'note', '') or h.prompted <> (b->>'prompted')::boolean
		or h.happened_at <> (b->>'happened_at')::timestamptz or h.person_id is distinct from (b->>'person')::uuid
		or h.knob_id is distinct from (b->'turn'->>'knob')::uuid or h.knob_version is distinct from (b->'turn'->>'version')::int
		or h.turned is distinct from (b->'turn'->>'turned')::numeric or h.moves is distinct from b->'turn'->'moves'`,
	`select (b->>'machine')::uuid, format('adjusting point %s, version %s, is not on record as it was sealed', b->>'knob', b->>'version')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'knob') e
	left join knob k on k.id = (b->>'knob')::uuid and k.version = (b->>'version')::int
	where k.id is null or k.machine_id <> (b->>'machine')::uuid or k.name <> b->>'name' or k.unit <> b->>'unit' or k.step <> (b->>'step')::numeric
		or k.retired <> coalesce((b->>'retired')::boolean, false) or k.reason <> b->>'reason' or k.made_at <> (b->>'at')::timestamptz
		or k.person_id is distinct from (b->>'person')::uuid
		or k.moves <> (select coalesce(jsonb_agg(jsonb_build_object('characteristic', x->'characteristic', 'per_unit', x->'size')), '[]') from jsonb_array_elements(b->'per_unit') x)`,
	`select p.id, format('%s versions of adjusting points are on record, %s were sealed', k.n, e.n) from plant p
	cross join lateral (select count(*) as n from knob where plant_id = p.id) k
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'knob') e where k.n <> e.n`,
	`select (b->>'machine')::uuid, format('machine state %s is not on record as it was sealed', b->>'state')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'machine state') e left join machine_state x on x.id = (b->>'state')::uuid
	where x.id is null or x.machine_id <> (b->>'machine')::uuid or x.at <> (b->>'at')::timestamptz or x.running <> (b->>'running')::boolean
		or x.part_id is distinct from (b->>'part')::uuid or x.lot <> coalesce(b->>'lot', '') or x.counter is distinct from (b->>'counter')::bigint`,
	`select p.id, format('%s changes and %s machine states are on record, %s and %s were sealed', h.n, x.n, eh.n, ex.n) from plant p
	cross join lateral (select count(*) as n from change where plant_id = p.id) h
	cross join lateral (select count(*) as n from machine_state where plant_id = p.id) x
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'change') eh
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'machine state') ex where h.n <> eh.n or x.n <> ex.n`,
}

// CheckRecord compares the tables with the ledger: subgroups and their statistics,
// set-ups, revisions, matters and what was done about them, reaction plans, boundaries,
// changes, machine states, people and devices, and what the plant has. A chain that holds
// says nothing about a table that was changed beside it. The ledger itself is
// VerifyLedger's question. It writes nothing.
func (s *Store) CheckRecord(ctx context.Context) (out []Difference, err error) {
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		out, err = checkRecord(ctx, tx)
		return err
	})
	return out, err
}

func checkRecord(ctx context.Context, q querier) (out []Difference, err error) {
	for _, sql := range slices.Concat(sealed, sealedSettings, sealedReaction, sealedEscalation, sealedProduct, sealedPeople, sealedOwner, sealedThings, sealedHandover) {
		rows, err := q.Query(ctx, sql+` limit 100`)
		if err != nil {
			return nil, fmt.Errorf("compare with the ledger: %w", err)
		}
		var of uuid.UUID
		var what string
		if _, err := pgx.ForEachRow(rows, []any{&of, &what}, func() error {
			out = append(out, Difference{of, what})
			return nil
		}); err != nil {
			return nil, fmt.Errorf("compare with the ledger: %w", err)
		}
	}
	return out, nil
}
