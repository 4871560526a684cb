package store

// sealedHandover compares notes, confirmations and daily roots with what was sealed of them.
var sealedHandover = []string{
	`select (b->>'line')::uuid, format('shift note %s is not on record as it was %s', b->>'note', b->>'step')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'shift note') e
	left join shift_note n on n.id = (b->>'note')::uuid
	left join shift_note_cleared c on c.note_id = n.id
	where n.id is null or n.line_id <> (b->>'line')::uuid
		or b->>'step' = 'written' and (n.text <> b->>'text' or n.at <> (b->>'at')::timestamptz or n.person_id <> (b->>'person')::uuid)
		or b->>'step' = 'cleared' and (c.note_id is null or c.at <> (b->>'at')::timestamptz or c.person_id <> (b->>'person')::uuid)`,
	`select (b->>'line')::uuid, format('that the handover of %s was read is not on record as it was sealed', b->>'shift_from')
	from (select convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'handover read') e
	left join handover_read r on r.line_id = (b->>'line')::uuid and r.shift_from = (b->>'shift_from')::timestamptz and r.person_id = (b->>'person')::uuid
	where r.line_id is null or r.at <> (b->>'at')::timestamptz`,
	`select chain, format('the root of %s is not on record as it was sealed', b->>'day')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'daily root') e
	left join daily_root r on r.plant_id = e.chain and r.day = (b->>'day')::date
	where r.day is null or encode(r.root, 'hex') <> b->>'root' or r.at <> (b->>'at')::timestamptz or cardinality(r.chains) <> (b->>'chains')::int`,
	// A chain that was cut or written anew since does not contain a head that a root was made of.
	`select k.chain, format('the chain does not contain entry %s, where it stood on %s', k.seq, r.day) from daily_root r
	cross join lateral unnest(r.chains, r.seqs, r.hashes) k (chain, seq, hash)
	left join ledger e on e.chain = k.chain and e.seq = k.seq and e.hash = k.hash where k.seq > 0 and e.chain is null`,
	`select p.id, format('%s notes, %s clearings, %s confirmations and %s roots are on record; %s, %s, %s and %s were sealed', n.n, c.n, r.n, d.n, e.written, e.cleared, e.read, e.roots)
	from plant p
	cross join lateral (select count(*) as n from shift_note where plant_id = p.id) n
	cross join lateral (select count(*) as n from shift_note_cleared where plant_id = p.id) c
	cross join lateral (select count(*) as n from handover_read where plant_id = p.id) r
	cross join lateral (select count(*) as n from daily_root where plant_id = p.id) d
	cross join lateral (select count(*) filter (where kind = 'shift note' and convert_from(body, 'UTF8')::jsonb->>'step' = 'written') as written,
		count(*) filter (where kind = 'shift note' and convert_from(body, 'UTF8')::jsonb->>'step' = 'cleared') as cleared,
		count(*) filter (where kind = 'handover read') as read, count(*) filter (where kind = 'daily root') as roots
		from ledger where chain = p.id and kind in ('shift note', 'handover read', 'daily root')) e
	where n.n <> e.written or c.n <> e.cleared or r.n <> e.read or d.n <> e.roots`,
}
