-- A rule that fired on one side and, after a correction, fires on the other has
-- fired twice: the one is withdrawn, the other found late, and both stay.
alter table signal drop constraint signal_pkey,
    add primary key (characteristic_id, taken_at, subgroup_id, panel, rule, side);
