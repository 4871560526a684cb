package store

// sealedProduct compares gauge checks and what was stated about product with what was
// sealed.
var sealedProduct = []string{
	`select (b->>'gauge')::uuid, format('gauge check %s is not on record as it was sealed', b->>'check')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'gauge check') e left join gauge_check k on k.id = (b->>'check')::uuid
	where k.id is null or k.gauge_id <> (b->>'gauge')::uuid or k.at <> (b->>'at')::timestamptz or k.good <> (b->>'good')::boolean
		or k.master is distinct from (b->>'master')::numeric or k.reading is distinct from (b->>'reading')::numeric or k.note <> coalesce(b->>'note', '')
		or k.next_check is distinct from (b->>'next_check')::date or k.recorded_at <> (b->>'recorded_at')::timestamptz
		or k.person_id is distinct from (b->>'person')::uuid`,
	`select p.id, format('%s gauge checks are on record, %s were sealed', k.n, e.n) from plant p
	cross join lateral (select count(*) as n from gauge_check where plant_id = p.id) k
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'gauge check') e where k.n <> e.n`,
	`select g.characteristic_id, format('nothing that was sealed makes the failed gauge check at %s', g.taken_at) from signal g
	where g.panel = 'gauge check' and not exists (select from gauge_check k where k.id = g.subgroup_id and not k.good and k.at = g.taken_at)`,
	`select e.chain, format('statement %s about product is not on record as it was sealed', b->>'entry')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'containment') e
	left join containment_entry x on x.id = (b->>'entry')::uuid
	left join containment c on c.id = x.containment_id and c.characteristic_id = e.chain
	where c.id is null or x.containment_id <> (b->>'containment')::uuid or x.step <> b->>'step' or x.quantity <> (b->>'quantity')::int
		or x.delta <> (b->>'delta')::int or x.place <> coalesce(b->>'place', '') or x.tag <> coalesce(b->>'tag', '') or x.note <> coalesce(b->>'note', '')
		or x.opens <> coalesce((b->>'opens')::boolean, false) or x.recorded_at <> (b->>'recorded_at')::timestamptz
		or x.person_id is distinct from (b->>'person')::uuid`,
	`select c.id, format('%s statements about product are on record, %s were sealed', x.n, e.n) from characteristic c
	cross join lateral (select count(*) as n from containment_entry x join containment k on k.id = x.containment_id where k.characteristic_id = c.id) x
	cross join lateral (select count(*) as n from ledger where chain = c.id and kind = 'containment') e where x.n <> e.n`,
	// A containment was opened with its matter, or by a statement, and every such opening
	// has its containment.
	`select c.characteristic_id, format('nothing that was sealed opens containment %s', c.id) from containment c
	where not exists (select from matter m where m.id = c.matter_id and m.id = c.id and m.characteristic_id = c.characteristic_id and m.opened_at = c.opened_at)
		and not exists (select from containment_entry x where x.containment_id = c.id and x.opens and x.recorded_at = c.opened_at)`,
	`select e.chain, format('the containment of matter %s is not on record', b->>'matter')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter') e
	where (b->>'contained')::boolean and not exists (select from containment c where c.matter_id = (b->>'matter')::uuid and c.characteristic_id = e.chain)`,
	// Whether it is settled follows from what was stated.
	`select c.characteristic_id, format('containment %s is %s on record, %s parts are left', c.id, case when c.settled_at is null then 'open' else 'settled' end, left_of.n)
	from containment c left join matter m on m.id = c.matter_id
	cross join lateral (select count(*) filter (where x.step not in ('gone', 'used', 'unmade', 'miscounted', 'unknown')) as stated,
		coalesce(sum(x.delta), 0) as n from containment_entry x where x.containment_id = c.id) left_of
	where c.settled_at is not null and (left_of.n <> 0 or c.matter_id is not null and m.closed_at is null)
		or c.settled_at is null and left_of.stated > 0 and left_of.n = 0 and (c.matter_id is null or m.closed_at is not null)`,
}
