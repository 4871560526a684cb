-- What can be turned on a machine, versioned: the newest version of an id is in force,
-- none is ever changed. moves lists the characteristics with what one unit of the scale
-- adds to each, as exact decimals in text.
create table knob (
    id         uuid        not null,
    version    int         not null,
    plant_id   uuid        not null references plant,
    machine_id uuid        not null references machine,
    name       text        not null,
    unit       text        not null, -- of its scale
    step       numeric     not null, -- the smallest move of it
    moves      jsonb       not null,
    retired    boolean     not null default false,
    reason     text        not null,
    made_at    timestamptz not null,
    person_id  uuid        references person,
    primary key (id, version),
    constraint knob_version_sane check (version >= 1),
    constraint knob_step_sane check (step > 0)
);
create index knob_of_machine on knob (machine_id, id, version desc);
grant select, insert on knob to holdfast_app;

-- An adjustment says what was turned, by how much on its own scale, and what that was
-- expected to do to every characteristic it moves, by the version that was in force when
-- it was recorded.
alter table change
    add column knob_id uuid,
    add column knob_version int,
    add column turned numeric,
    add column moves jsonb,
    add constraint change_knob_known foreign key (knob_id, knob_version) references knob (id, version),
    add constraint change_knob_whole check ((knob_id is null) = (knob_version is null) and (knob_id is null) = (turned is null)
        and (knob_id is null) = (moves is null));
