-- Of two sides of one firing only one has room: the one that stands.
delete from signal g where exists (select from signal o where o.characteristic_id = g.characteristic_id
    and o.taken_at = g.taken_at and o.subgroup_id = g.subgroup_id and o.panel = g.panel and o.rule = g.rule and o.side <> g.side
    and (g.withdrawn and not o.withdrawn or g.withdrawn = o.withdrawn and o.side > g.side));
alter table signal drop constraint signal_pkey,
    add primary key (characteristic_id, taken_at, subgroup_id, panel, rule);
