-- The language in which a tablet speaks as long as whoever is signed in has none of their
-- own; empty leaves it to its browser. Like a person's it is a preference: it may change
-- and is not in the ledger.
alter table device add column language text not null default '';
alter table device add constraint device_language_short check (length(language) <= 35);

-- Names under which people were printed before. The salt of the name that they have now
-- is theirs too, so a signature under an earlier name can still be shown to be one.
create table person_name (
    person_id  uuid        not null references person,
    plant_id   uuid        not null references plant,
    name       text        not null,
    until      timestamptz not null,
    changed_by uuid        references person,
    primary key (person_id, until)
);
-- They go when a name is erased.
grant select, insert, delete on person_name to holdfast_app;
