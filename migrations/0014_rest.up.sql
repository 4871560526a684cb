-- Where suspect product is that was not put aside, as a person answers it when the matter
-- is closed. It changes no quantity that is kept aside.
alter table containment_entry drop constraint containment_entry_step_known,
    add constraint containment_entry_step_known check (step in ('kept', 'recount', 'none', 'released', 'reworked', 'scrapped', 'returned', 'other',
        'gone', 'used', 'unmade', 'miscounted', 'unknown'));
