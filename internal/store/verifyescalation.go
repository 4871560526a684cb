package store

// sealedEscalation compares fired steps and quietings with what was sealed of them.
var sealedEscalation = []string{
	`select coalesce((b->>'matter')::uuid, (b->>'overdue')::uuid), format('escalation step %s is not on record as it was sealed', b->>'escalation_step')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'escalation') e
	left join escalation_step x on x.id = (b->>'escalation_step')::uuid
	where x.id is null or x.station_id <> (b->>'station')::uuid or x.matter_id is distinct from (b->>'matter')::uuid
		or x.overdue_id is distinct from (b->>'overdue')::uuid or x.turn <> (b->>'turn')::int or x.step <> (b->>'number')::int
		or x.kind <> b->>'calls' or x.fired_at <> (b->>'at')::timestamptz`,
	`select (b->>'matter')::uuid, format('quieting %s is not on record as it was sealed', b->>'quieting')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'quieting') e
	left join quieting x on x.id = (b->>'quieting')::uuid
	where x.id is null or x.matter_id <> (b->>'matter')::uuid or x.kind <> b->>'calls' or x.at <> (b->>'at')::timestamptz
		or x.until <> (b->>'until')::timestamptz or x.reason <> coalesce(b->>'reason', '') or x.person_id <> (b->>'person')::uuid`,
	`select p.id, format('%s escalation steps and %s quietings are on record, %s and %s were sealed', x.n, q.n, ex.n, eq.n) from plant p
	cross join lateral (select count(*) as n from escalation_step where plant_id = p.id) x
	cross join lateral (select count(*) as n from quieting where plant_id = p.id) q
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'escalation') ex
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'quieting') eq where x.n <> ex.n or q.n <> eq.n`,
}
