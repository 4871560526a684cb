package store

// sealedReaction compares reaction plans and what people did about matters with what was
// sealed.
var sealedReaction = []string{
	`select e.chain, format('reaction plan %s is not on record as it was sealed', b->>'plan')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'reaction plan') e
	left join reaction_plan p on p.id = (b->>'plan')::uuid and p.plant_id = e.chain
	where p.id is null or p.characteristic_id is distinct from (b->>'characteristic')::uuid or p.family <> coalesce(b->>'family', '') or p.kind <> b->>'about'
		or p.version <> (b->>'version')::int or p.withdrawn <> coalesce((b->>'withdrawn')::boolean, false) or coalesce(nullif(p.steps, 'null'), '[]') <> b->'steps'
		or p.confirm <> (b->>'confirm')::boolean or p.verify <> (b->>'verify')::boolean or p.made_at <> (b->>'at')::timestamptz
		or p.person_id is distinct from (b->>'person')::uuid`,
	`select e.chain, format('answer %s is not on record as it was sealed', b->>'answer')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter answer') e
	left join matter_answer a on a.id = (b->>'answer')::uuid left join matter m on m.id = a.matter_id and m.characteristic_id = e.chain
	where m.id is null or a.matter_id <> (b->>'matter')::uuid or a.plan_id <> (b->>'plan')::uuid or a.attempt <> (b->>'attempt')::int or a.step <> (b->>'step')::int
		or a.remedy <> coalesce((b->>'remedy')::boolean, false) or a.seq <> (b->>'seq')::int or a.said <> b->>'said' or a.value is distinct from (b->>'value')::numeric
		or a.note <> coalesce(b->>'note', '') or a.at <> (b->>'at')::timestamptz or a.person_id <> (b->>'person')::uuid`,
	`select e.chain, format('fix %s is not on record as it was sealed', b->>'fix')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter fix') e
	left join matter_fix f on f.id = (b->>'fix')::uuid left join matter m on m.id = f.matter_id and m.characteristic_id = e.chain
	where m.id is null or f.matter_id <> (b->>'matter')::uuid or f.number <> (b->>'number')::int or f.cause <> b->>'cause' or f.cause_id is distinct from (b->>'cause_id')::uuid
		or f.action <> coalesce(b->>'action', '') or f.restart_at is distinct from (b->>'restart_at')::timestamptz or f.at <> (b->>'at')::timestamptz
		or f.person_id <> (b->>'person')::uuid
		or f.restart_at is not null and not exists (select from boundary where characteristic_id = e.chain and kind = 'restart' and at = f.restart_at)`,
	`select e.chain, format('verification %s is not on record as it was sealed', b->>'verification')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter verification') e
	left join matter_verification v on v.id = (b->>'verification')::uuid left join matter m on m.id = v.matter_id and m.characteristic_id = e.chain
	where m.id is null or v.matter_id <> (b->>'matter')::uuid or v.fix_id <> (b->>'fix')::uuid or v.accepted <> (b->>'accepted')::boolean
		or v.note <> coalesce(b->>'note', '') or v.at <> (b->>'at')::timestamptz or v.person_id <> (b->'signature'->>'person')::uuid`,
	// And nothing is there besides.
	`select p.id, format('%s reaction plans, %s answers, %s fixes and %s verifications are on record, %s, %s, %s and %s were sealed', t.plans, t.answers, t.fixes, t.words, e.plans, e.answers, e.fixes, e.words)
	from plant p cross join lateral (select
			(select count(*) from reaction_plan where plant_id = p.id) as plans, (select count(*) from matter_answer where plant_id = p.id) as answers,
			(select count(*) from matter_fix where plant_id = p.id) as fixes, (select count(*) from matter_verification where plant_id = p.id) as words) t
	cross join lateral (select count(*) filter (where kind = 'reaction plan') as plans, count(*) filter (where kind = 'matter answer') as answers,
			count(*) filter (where kind = 'matter fix') as fixes, count(*) filter (where kind = 'matter verification') as words from ledger where plant_id = p.id) e
	where (t.plans, t.answers, t.fixes, t.words) <> (e.plans, e.answers, e.fixes, e.words)`,
	// No matter was closed without what the plans demanded that it was closed under. What
	// two plans ask alike is answered once, under either.
	`select e.chain, format('matter %s was closed without an answer to step %s of its plan', b->>'matter', st.n)
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter' and body like '%"plans":%') e
	cross join lateral jsonb_array_elements_text(b->'plans') x (plan) join reaction_plan p on p.id = x.plan::uuid
	cross join lateral generate_series(1, jsonb_array_length(p.steps)) st (n)
	where not exists (select from matter_answer a join reaction_plan r on r.id = a.plan_id
		where a.matter_id = (b->>'matter')::uuid and (a.plan_id = p.id and a.step = st.n or a.plan_id <> p.id and r.steps->(a.step - 1) = p.steps->(st.n - 1)) and not a.remedy
		and a.attempt = (select max(f.number) from matter_fix f where f.matter_id = a.matter_id))`,
	// A round confirms a fix when it was taken behind it, was on record when the matter was
	// closed and had not been voided by then; what was voided later did confirm it.
	`select e.chain, format('matter %s was closed without the round that its plan demands to confirm the fix', b->>'matter')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter' and body like '%"plans":%') e
	join lateral (select coalesce(f.restart_at, f.at) as since from matter_fix f where f.matter_id = (b->>'matter')::uuid
		order by f.number desc limit 1) fix on true
	where exists (select from jsonb_array_elements_text(b->'plans') x (plan) join reaction_plan p on p.id = x.plan::uuid where p.confirm)
		and not exists (select from subgroup s where s.characteristic_id = e.chain and s.taken_at >= fix.since and s.recorded_at <= (b->>'at')::timestamptz
			and not exists (select from subgroup v where v.characteristic_id = e.chain and v.taken_at = s.taken_at and v.id = s.id
				and v.voided and v.recorded_at < (b->>'at')::timestamptz))`,
	`select e.chain, format('matter %s was closed without the second person that its plan demands', b->>'matter')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'matter' and body like '%"plans":%') e
	where exists (select from jsonb_array_elements_text(b->'plans') x (plan) join reaction_plan p on p.id = x.plan::uuid where p.verify)
		and not exists (select from matter_verification v join matter_fix f on f.id = v.fix_id
			where v.matter_id = (b->>'matter')::uuid and v.accepted and v.person_id <> f.person_id)`,
}
