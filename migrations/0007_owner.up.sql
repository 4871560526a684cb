-- The numbers of the plant that an engineer may change. A change adds a version with
-- all of them; before the first the defaults of the program hold.
create table plant_settings (
    plant_id  uuid        not null references plant,
    version   int         not null,
    id        uuid        not null, -- from the sender, so that sending it again is recognised
    content   jsonb       not null,
    reason    text        not null,
    made_at   timestamptz not null,
    person_id uuid        not null references person,
    primary key (plant_id, version),
    constraint plant_settings_sent_once unique (plant_id, id)
);

grant select, insert on plant_settings to holdfast_app;

-- How product of a stable process that is not capable is protected meanwhile. A fact; it
-- holds until it is ended.
create table protection (
    id                uuid primary key, -- from the sender
    plant_id          uuid        not null references plant,
    characteristic_id uuid        not null references characteristic,
    method            text        not null,
    instruction       text        not null,
    decided_by        text        not null,
    from_at           timestamptz not null,
    recorded_at       timestamptz not null,
    person_id         uuid        not null references person,
    constraint protection_method_known check (method in ('inspect-all', 'second-check', 'sorting', 'concession', 'other'))
);
create index protection_course on protection (characteristic_id, from_at);

-- The signed mark on what is below capable, until a stated time.
create table acceptance (
    id                uuid primary key, -- from the sender
    plant_id          uuid        not null references plant,
    characteristic_id uuid        not null references characteristic,
    setup_version     int         not null,
    reason            text        not null,
    told              text        not null,
    until_at          timestamptz not null,
    accepted_at       timestamptz not null,
    person_id         uuid        not null references person,
    constraint acceptance_ends check (until_at > accepted_at),
    foreign key (characteristic_id, setup_version) references setup
);
create index acceptance_course on acceptance (characteristic_id, accepted_at desc);

-- What ended a protection or an acceptance.
create table ending (
    of_id             uuid primary key,
    id                uuid        not null, -- from the sender
    plant_id          uuid        not null references plant,
    characteristic_id uuid        not null references characteristic,
    reason            text        not null,
    ended_at          timestamptz not null,
    person_id         uuid        not null references person,
    constraint ending_sent_once unique (plant_id, id)
);

-- Derived: what routing needs of the newest subgroups, kept so that nobody waits for it.
-- state_version is that of the state row which it was computed from.
create table owner_standing (
    characteristic_id uuid primary key references characteristic,
    plant_id          uuid        not null references plant,
    state_version     bigint      not null,
    settings_version  int         not null,
    matter_id         uuid,
    computed_at       timestamptz not null,
    standing          jsonb       not null
) with (fillfactor = 70);

grant select, insert on protection, acceptance, ending, owner_standing to holdfast_app;
grant update on owner_standing to holdfast_app;
