-- The record of a plant. What is measured and what people did are facts and are
-- only ever added; what follows from them (signal, checkpoint, the state row)
-- is derived and may be judged again. Ids are UUIDv7 made by the program; there
-- is no sequence, and every natural key includes the plant, so that the records
-- of several plants can be brought together without colliding.

do $$
begin
    if not exists (select from pg_roles where rolname = 'holdfast_app') then
        create role holdfast_app nologin;
    end if;
end
$$;

create table plant (
    id         uuid primary key,
    name       text        not null,
    time_zone  text        not null, -- IANA name
    demo       boolean     not null default false,
    created_at timestamptz not null
);

create table shift (
    id       uuid primary key,
    plant_id uuid not null references plant,
    name     text not null,
    starts   time not null, -- local wall time
    constraint shift_name_once unique (plant_id, name),
    constraint shift_start_once unique (plant_id, starts)
);

create table person (
    id         uuid primary key,
    plant_id   uuid        not null references plant,
    login      text        not null,
    name       text        not null,
    name_salt  bytea       not null, -- erased together with the name
    roles      text[]      not null,
    secret     text        not null, -- argon2id, PHC string
    active     boolean     not null default true,
    created_at timestamptz not null,
    constraint person_login_once unique (plant_id, login),
    constraint person_roles_known check (roles <@ array['operator', 'supervisor', 'engineer', 'administrator'])
);

-- The table that the session library keeps; the token is stored hashed.
create table sessions (
    token  text primary key,
    data   bytea       not null,
    expiry timestamptz not null
);
create index sessions_expiry on sessions (expiry);

create table line (
    id       uuid primary key,
    plant_id uuid not null references plant,
    name     text not null,
    position int  not null,
    constraint line_name_once unique (plant_id, name)
);

create table station (
    id       uuid primary key,
    plant_id uuid not null references plant,
    line_id  uuid not null references line,
    name     text not null,
    family   text not null default '', -- stations of one family share a catalogue of causes
    position int  not null,
    constraint station_name_once unique (plant_id, name)
);

create table part (
    id       uuid primary key,
    plant_id uuid not null references plant,
    name     text not null,
    family   text not null default '',
    constraint part_name_once unique (plant_id, name)
);

create table machine (
    id             uuid primary key,
    plant_id       uuid not null references plant,
    station_id     uuid not null references station,
    name           text not null,
    position       int  not null,
    parts_per_hour double precision not null default 0,
    constraint machine_name_once unique (plant_id, name),
    constraint machine_rate_sane check (parts_per_hour >= 0 and parts_per_hour < 'Infinity')
);

create table stream (
    id         uuid primary key,
    plant_id   uuid not null references plant,
    machine_id uuid not null references machine,
    name       text not null,
    position   int  not null,
    constraint stream_name_once unique (plant_id, machine_id, name)
);

-- What a machine did: a row a change of state, part, order or counter reading.
create table machine_state (
    id          uuid primary key,
    plant_id    uuid        not null references plant,
    machine_id  uuid        not null references machine,
    at          timestamptz not null,
    running     boolean     not null,
    part_id     uuid        references part,
    lot         text        not null default '',
    counter     bigint,
    recorded_at timestamptz not null,
    person_id   uuid        references person
);
create index machine_state_course on machine_state (machine_id, at, id);

create table gauge (
    id         uuid primary key,
    plant_id   uuid not null references plant,
    name       text not null,
    resolution numeric,
    next_check date,
    constraint gauge_name_once unique (plant_id, name)
);

create table characteristic (
    id         uuid primary key,
    plant_id   uuid not null references plant,
    station_id uuid not null references station,
    machine_id uuid not null references machine,
    part_id    uuid references part, -- one part, or
    family     text not null default '', -- a family of parts, or any part when both are empty
    name       text not null,
    position   int  not null,
    constraint characteristic_name_once unique (plant_id, machine_id, name)
);
create index characteristic_station on characteristic (station_id, position);

create table setup (
    characteristic_id uuid not null references characteristic,
    version           int  not null,
    plant_id          uuid not null references plant,
    unit              text not null,
    decimals          int  not null,
    target            numeric,
    lower_spec        numeric,
    upper_spec        numeric,
    worse             text not null default '', -- 'high', 'low' or neither
    chart             text not null,
    size              int  not null,
    plan              jsonb not null,
    control_plan      jsonb not null,
    gauge_id          uuid references gauge,
    made_at           timestamptz not null,
    person_id         uuid references person,
    primary key (characteristic_id, version),
    constraint setup_decimals_sane check (decimals between 0 and 6),
    constraint setup_size_sane check (size between 1 and 25),
    constraint setup_worse_known check (worse in ('', 'high', 'low')),
    constraint setup_spec_ordered check (lower_spec is null or upper_spec is null or lower_spec < upper_spec)
);

create table revision (
    id                uuid primary key,
    plant_id          uuid not null references plant,
    characteristic_id uuid not null references characteristic,
    number            int  not null,
    setup_version     int  not null,
    chart             text not null,
    estimator         text not null,
    center            double precision not null,
    sigma             double precision not null,
    multiple          double precision not null,
    rules             jsonb not null,
    basis             jsonb not null, -- the stretch, how many subgroups, which were left out and why
    reason            text not null,
    author_id         uuid not null references person,
    approver_id       uuid references person,
    frozen_at         timestamptz not null,
    in_force_from     timestamptz not null,
    constraint revision_number_once unique (plant_id, characteristic_id, number),
    constraint revision_sigma_sane check (sigma > 0 and sigma < 'Infinity'),
    constraint revision_never_backdated check (in_force_from >= frozen_at)
);

-- Where the fold starts afresh. A revision or a set-up that ends one says what is
-- in force from here on (no revision: learning); the others keep what was.
create table boundary (
    id                uuid primary key,
    plant_id          uuid not null references plant,
    characteristic_id uuid not null references characteristic,
    at                timestamptz not null,
    kind              text not null,
    revision_id       uuid references revision,
    recorded_at       timestamptz not null,
    constraint boundary_kind_known check (kind in ('revision', 'setup', 'restart', 'changeover'))
);
create index boundary_course on boundary (characteristic_id, at desc, id desc);
create index boundary_force on boundary (characteristic_id, at desc, id desc) where kind in ('revision', 'setup');

-- Rounds, subgroups and the ledger have no foreign keys: what they point to is read
-- under the lock that a save holds and is never removed, and locking one row of the plant
-- and one of the person from every save would make saves wait for one another.

-- One visit. The id comes from the sender; digest tells a repeated send from another
-- round under the same id; answer is what the sender was told.
create table round (
    id          uuid primary key,
    plant_id    uuid        not null,
    station_id  uuid        not null,
    due_at      timestamptz,
    occasion    text        not null default '',
    taken_at    timestamptz not null,
    taken_raw   timestamptz not null, -- by the sender's own clock
    skew_ms     bigint      not null,
    recorded_at timestamptz not null,
    person_id   uuid,
    source      text        not null,
    digest      bytea       not null,
    answer      jsonb       not null
);
create index round_course on round (station_id, taken_at);

-- Every version of every subgroup. A correction adds a version under the same id
-- and taken at; a void is a version too. The key is the order in which subgroups
-- are judged, so that the newest, a stretch or all of them is one walk along it.
create table subgroup (
    characteristic_id uuid        not null,
    taken_at          timestamptz not null,
    id                uuid        not null,
    version           int         not null,
    plant_id          uuid        not null,
    round_id          uuid        not null,
    setup_version     int         not null,
    decimals          int         not null,
    readings          bigint[]    not null,
    keyed_by          uuid[]      not null, -- one for all, or one a reading
    streams           uuid[],
    retyped           jsonb,                -- first typings that were typed again
    short_reason      text        not null default '',
    reading_sum       bigint      not null,
    reading_range     bigint      not null,
    reading_sd        double precision not null, -- in the unit
    outside           int         not null, -- readings outside specification
    machine_id        uuid        not null,
    part_id           uuid,
    lot               text        not null default '',
    gauge_id          uuid,
    recorded_at       timestamptz not null,
    person_id         uuid,
    voided            boolean     not null default false,
    reason            text        not null default '', -- of the correction or void
    primary key (characteristic_id, taken_at, id, version),
    constraint subgroup_sd_sane check (reading_sd >= 0 and reading_sd < 'Infinity')
);

create table matter (
    id                uuid primary key,
    plant_id          uuid        not null references plant,
    station_id        uuid        not null references station,
    characteristic_id uuid        not null references characteristic,
    opened_at         timestamptz not null,
    opened_taken      timestamptz not null, -- of the subgroup that opened it
    opened_subgroup   uuid        not null,
    alarmed           boolean     not null,
    taken_by          uuid references person,
    taken_at          timestamptz,
    cause_id          uuid,
    cause             text        not null default '',
    action            text        not null default '',
    described_by      uuid references person,
    described_at      timestamptz,
    restart_at        timestamptz,
    closed_by         uuid references person,
    closed_at         timestamptz,
    closing           text        not null default '', -- 'fixed', 'nothing done' or 'withdrawn'
    version           int         not null default 1
);
create unique index matter_one_open on matter (plant_id, characteristic_id) where closed_at is null;
create index matter_course on matter (characteristic_id, opened_taken);

-- A rule that fired at a subgroup, or a reading outside specification. Derived:
-- judged again it is withdrawn or stands again, and never removed.
create table signal (
    characteristic_id uuid        not null references characteristic,
    taken_at          timestamptz not null,
    subgroup_id       uuid        not null,
    panel             text        not null,
    rule              text        not null,
    plant_id          uuid        not null references plant,
    side              text        not null,
    revision_id       uuid,
    matter_id         uuid references matter,
    found_late        boolean     not null default false,
    withdrawn         boolean     not null default false,
    judged_at         timestamptz not null,
    primary key (characteristic_id, taken_at, subgroup_id, panel, rule),
    constraint signal_panel_known check (panel in ('location', 'dispersion', 'reading'))
);
create index signal_matter on signal (matter_id) where matter_id is not null;

create table checkpoint (
    characteristic_id uuid        not null references characteristic,
    taken_at          timestamptz not null,
    subgroup_id       uuid        not null,
    plant_id          uuid        not null references plant,
    segment_from      timestamptz,
    revision_id       uuid,
    memory            bytea       not null,
    primary key (characteristic_id, taken_at, subgroup_id)
);

-- The one row that the write path locks: fold state, ledger head, what is open.
create table characteristic_state (
    characteristic_id uuid primary key references characteristic,
    plant_id          uuid   not null references plant,
    station_id        uuid   not null references station,
    version           bigint not null default 0,
    changed           xid8   not null default pg_current_xact_id(),
    setup_version     int    not null,
    last_taken        timestamptz,
    last_subgroup     uuid,
    last_due          timestamptz,
    segment_from      timestamptz,
    revision_id       uuid,
    memory            bytea  not null default '',
    since_checkpoint  int    not null default 0,
    matter_id         uuid,
    ledger_seq        bigint not null default 0,
    ledger_hash       bytea  not null
) with (fillfactor = 70);

create table change (
    id                uuid primary key,
    plant_id          uuid        not null references plant,
    station_id        uuid        not null references station,
    machine_id        uuid        not null references machine,
    characteristic_id uuid references characteristic, -- what an adjustment is meant to move
    kind              text        not null,
    size              numeric, -- signed, in the unit of the characteristic
    note              text        not null default '',
    prompted          boolean     not null default false,
    happened_at       timestamptz not null,
    recorded_at       timestamptz not null,
    person_id         uuid references person,
    digest            bytea       not null,
    constraint change_kind_known check (kind in ('adjustment', 'tool', 'material', 'maintenance', 'setting', 'changeover'))
);
create index change_course on change (machine_id, happened_at);

create table cause (
    id       uuid primary key,
    plant_id uuid not null references plant,
    family   text not null default '',
    name     text not null,
    position int  not null,
    constraint cause_name_once unique (plant_id, family, name)
);

-- Steps of what to do on a signal, by characteristic and kind of matter; versioned.
create table reaction_plan (
    characteristic_id uuid not null references characteristic,
    kind              text not null,
    version           int  not null,
    plant_id          uuid not null references plant,
    steps             jsonb not null,
    made_at           timestamptz not null,
    person_id         uuid references person,
    primary key (characteristic_id, kind, version)
);

-- What could not be taken as it came and waits for a person: another round under a
-- known id, a stale correction, a time that cannot be.
create table set_aside (
    id          uuid primary key,
    plant_id    uuid        not null references plant,
    station_id  uuid references station,
    about       uuid        not null, -- the id it came under
    why         text        not null,
    body        jsonb       not null,
    digest      bytea       not null,
    came_at     timestamptz not null,
    person_id   uuid references person,
    settled_at  timestamptz,
    settled_by  uuid references person,
    constraint set_aside_once unique (plant_id, about, digest)
);

create table ledger (
    chain    uuid     not null,
    seq      bigint   not null,
    plant_id uuid     not null,
    kind     text     not null,
    encoding smallint not null,
    body     bytea    not null,
    previous bytea    not null,
    hash     bytea    not null,
    primary key (chain, seq),
    constraint ledger_hash_size check (length(hash) = 32 and length(previous) = 32)
);

-- Heads of the chains that have no state row: the plant's own.
create table chain_head (
    chain    uuid primary key,
    plant_id uuid   not null references plant,
    seq      bigint not null,
    hash     bytea  not null
);

-- The application reads and adds everything; it changes only what is not fact.
-- On samples and on the ledger it can neither update nor delete.
grant usage on schema public to holdfast_app;
grant select, insert on all tables in schema public to holdfast_app;
grant update on plant, shift, person, line, station, part, machine, stream, gauge, characteristic,
    matter, signal, checkpoint, characteristic_state, cause, set_aside, chain_head to holdfast_app;
grant update, delete on sessions to holdfast_app;
grant delete on checkpoint to holdfast_app;
