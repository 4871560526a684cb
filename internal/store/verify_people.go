package store

// sealedPeople compares people and devices with what was sealed about them. Names of
// people are not sealed, so that they can be erased; where one was mended, hashes are.
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
	// A name that was mended is bound from then on, and so is the one before it.
	`with e as (select seq, b->>'subject' as subject, b->'content' as c from
		(select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'arrangement') l where b->>'what' = 'name changed'),
	latest as (select distinct on (subject) subject, c->>'name_hash' as v from e order by subject, seq desc)
	select p.id, format('person %s is not named as was sealed', p.id) from person p left join latest l on l.subject = p.id::text
	where p.erased_at is null and (l.v <> encode(sha256(p.name_salt || convert_to(p.name, 'UTF8')), 'hex')
		or exists (select from e where e.subject = p.id::text and not exists (select from person_name n
			where n.person_id = p.id and encode(sha256(p.name_salt || convert_to(n.name, 'UTF8')), 'hex') = e.c->>'was_hash'))
		or (select count(*) from e where e.subject = p.id::text) <> (select count(*) from person_name n where n.person_id = p.id))`,
	// A badge that nobody sealed, and sessions that were to be over and are not. Until the
	// instant was sealed too there is only the act to go by.
	`with e as (select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'arrangement'),
	badge as (select distinct on (b->>'subject') b->>'subject' as subject, (b->'content'->>'badge')::boolean as v from e
		where b->>'what' = 'badge changed' order by b->>'subject', seq desc),
	ended as (select distinct on (b->>'subject') b->>'subject' as subject, (b->'content'->>'sessions_since')::timestamptz as v from e
		where b->>'what' in ('secret changed', 'pin changed', 'badge changed') or b->'content' ? 'sessions_since' order by b->>'subject', seq desc)
	select p.id, format('badge or sessions of person %s are not as they were sealed', p.id) from person p
	left join badge b on b.subject = p.id::text left join ended n on n.subject = p.id::text
	where p.erased_at is null and coalesce(b.v, false) <> (p.badge is not null)
		or n.subject is null and p.sessions_since is not null or n.v is not null and n.v is distinct from p.sessions_since`,
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
