package store

// sealedThings compares the names of what the plant has, where it stands and whether it is
// retired with the newest that was sealed about each.
var sealedThings = []string{`with e as (select seq, (b->>'subject')::uuid as subject, b->'content' as content
		from (select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'arrangement') x where b->'content' is not null),
	named as (select distinct on (subject) subject, content->>'name' as name from e where content ? 'name' order by subject, seq desc),
	retired as (select distinct on (subject) subject, (content->>'retired')::boolean as retired from e where content ? 'retired' order by subject, seq desc),
	t as (select id, name, retired_at from line union all select id, name, retired_at from station union all select id, name, retired_at from machine
		union all select id, name, retired_at from part union all select id, name, retired_at from gauge union all select id, name, retired_at from characteristic)
	select t.id, format('%s is not on record as it was sealed', t.name) from t
	join named n on n.subject = t.id left join retired r on r.subject = t.id
	where n.name <> t.name or coalesce(r.retired, false) <> (t.retired_at is not null)`,
	`with e as (select seq, (b->>'subject')::uuid as subject, b->'content'->>'station' as station
		from (select seq, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'arrangement') x where b->'content' ? 'station'),
	stands as (select distinct on (subject) subject, station from e order by subject, seq desc),
	t as (select id, name, station_id from machine union all select id, name, station_id from characteristic)
	select t.id, format('%s stands at another station than was sealed', t.name) from t join stands n on n.subject = t.id
	where n.station <> t.station_id::text`,
	`select c.id, format('%s is measured at another station than its machine stands at', c.name) from characteristic c
	join machine m on m.id = c.machine_id join characteristic_state s on s.characteristic_id = c.id
	where c.station_id <> m.station_id or s.station_id <> m.station_id`}
