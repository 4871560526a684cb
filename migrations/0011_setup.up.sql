-- What a plant has is retired and never removed: what was recorded points to it.
alter table line add column retired_at timestamptz;
alter table station add column retired_at timestamptz;
alter table machine add column retired_at timestamptz;
alter table stream add column retired_at timestamptz;
alter table part add column retired_at timestamptz;
alter table gauge add column retired_at timestamptz;
alter table characteristic add column retired_at timestamptz;

-- A shift that is no longer worked leaves its name and its start to another.
alter table shift add column retired_at timestamptz,
    drop constraint shift_name_once,
    drop constraint shift_start_once;
create unique index shift_name_once on shift (plant_id, name) where retired_at is null;
create unique index shift_start_once on shift (plant_id, starts) where retired_at is null;

-- When somebody last said that name and time zone are right; null after an installation.
alter table plant add column confirmed_at timestamptz;

-- A description of a plant that was sent in and waits to be looked at and confirmed. What
-- is confirmed becomes lines, machines and characteristics; this is only the waiting.
create table description (
    id        uuid primary key,
    plant_id  uuid        not null references plant,
    person_id uuid        not null references person,
    sent_at   timestamptz not null,
    name      text        not null, -- of the file
    content   bytea       not null
);
grant select, insert, delete on description to holdfast_app;
