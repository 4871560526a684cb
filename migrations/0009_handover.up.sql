-- What one shift writes down for those that follow, carried until somebody clears it.
create table shift_note (
    id         uuid primary key,
    plant_id   uuid        not null references plant,
    line_id    uuid        not null references line,
    text       text        not null,
    at         timestamptz not null,
    person_id  uuid        not null references person,
    digest     bytea       not null
);
create index shift_note_line on shift_note (line_id, at);

create table shift_note_cleared (
    note_id   uuid primary key references shift_note,
    plant_id  uuid        not null references plant,
    at        timestamptz not null,
    person_id uuid        not null references person
);

-- Who confirmed having read what a shift handed over.
create table handover_read (
    plant_id   uuid        not null references plant,
    line_id    uuid        not null references line,
    shift_from timestamptz not null,
    person_id  uuid        not null references person,
    at         timestamptz not null,
    primary key (line_id, shift_from, person_id)
);

-- Once a day where every chain of the ledger stood, and the one hash over it that is printed
-- and leaves the box. It is itself sealed in the plant's chain.
create table daily_root (
    plant_id uuid        not null references plant,
    day      date        not null, -- of the plant
    at       timestamptz not null,
    chains   uuid[]      not null,
    seqs     bigint[]    not null,
    hashes   bytea[]     not null,
    root     bytea       not null,
    primary key (plant_id, day)
);

create index matter_station_opened on matter (station_id, opened_at);
create index matter_station_closed on matter (station_id, closed_at);

grant select, insert on shift_note, shift_note_cleared, handover_read, daily_root to holdfast_app;
