package store

// sealedPeople compares people and devices with what was sealed about them. Names of
// people are not sealed, so that they can be erased.
var sealedPeople = []string{
	`with e as (select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'arrangement'),
	roles as (select distinct on (b->>'subject') b->>'subject' as subject, b->'content'->'roles' as v from e
		where b->'content' ? 'roles' order by b->>'subject', seq desc),
	active as (select distinct on (b->>'subject') b->>'subject' as subject, (b->'content'->>'active')::boolean as v from e
		where b->>'what' like 'person %' and b->'content' ? 'active' order by b->>'subject', seq desc),
	erased as (select b->>'subject' as subject, (b->>'at')::timestamptz as v from e where b->>'what' = 'name erased')
	select p.id, format('person %s may do or be something else than was sealed', p.id) from person p
	left join roles r on r.subject = p.id::text left join active a on a.subject = p.id::text left join erased x on x.subject = p.id::text
	where r.v is distinct from to_jsonb(p.roles) or coalesce(a.v, true) <> p.active or x.v is distinct from p.erased_at`,
	`with e as (select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'device'),
	holds as (select distinct on (b->>'device') b from e where b->>'step' in ('enrolled', 'changed') order by b->>'device', seq desc),
	first as (select b from e where b->>'step' = 'enrolled'), revoked as (select b from e where b->>'step' = 'revoked')
	select (h.b->>'device')::uuid, format('device %s is not on record as it was sealed', h.b->>'device') from holds h
	join first f on f.b->>'device' = h.b->>'device' left join revoked r on r.b->>'device' = h.b->>'device'
	left join device d on d.id = (h.b->>'device')::uuid
	where d.id is null or d.kind <> h.b->>'kind' or d.name <> h.b->>'name' or d.station_id is distinct from (h.b->>'station')::uuid
		or d.line_id is distinct from (h.b->>'line')::uuid or d.lock_minutes <> coalesce((h.b->>'lock_minutes')::int, 0)
		or d.enrolled_at <> (f.b->>'at')::timestamptz or d.enrolled_by is distinct from (f.b->>'person')::uuid
		or d.revoked_at is distinct from (r.b->>'at')::timestamptz or d.revoked_by is distinct from (r.b->>'person')::uuid`,
	`select p.id, format('%s devices are on record, %s were sealed', d.n, e.n) from plant p
	cross join lateral (select count(*) as n from device where plant_id = p.id) d
	cross join lateral (select count(*) as n from ledger where chain = p.id and kind = 'device'
		and convert_from(body, 'UTF8')::jsonb->>'step' = 'enrolled') e where d.n <> e.n`,
}
