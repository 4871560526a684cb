delete from containment_entry where step in ('gone', 'used', 'unmade', 'miscounted', 'unknown');
alter table containment_entry drop constraint containment_entry_step_known,
    add constraint containment_entry_step_known check (step in ('kept', 'recount', 'none', 'released', 'reworked', 'scrapped', 'returned', 'other'));
