-- Tablets, wall screens and senders, and how people come in at a tablet.

create table device (
    id           uuid primary key,
    plant_id     uuid        not null references plant,
    kind         text        not null,
    name         text        not null,
    station_id   uuid        references station, -- where a tablet stands; what a sender measures for, if it is one place
    line_id      uuid        references line,    -- what a wall screen shows; null: the whole plant
    lock_minutes int         not null default 0, -- a tablet locks after so long without a touch
    secret_hash  bytea       not null,           -- SHA-256 of 128 random bits or more
    enrolled_at  timestamptz not null,
    enrolled_by  uuid        references person,  -- who made the code
    last_contact timestamptz,
    revoked_at   timestamptz,
    revoked_by   uuid        references person,
    constraint device_secret_once unique (plant_id, secret_hash),
    constraint device_kind_known check (kind in ('tablet', 'wall', 'sender')),
    constraint device_place_fits check (kind <> 'tablet' or station_id is not null),
    constraint device_lock_sane check (lock_minutes between 0 and 240)
);
create unique index device_name_once on device (plant_id, name) where revoked_at is null;

-- A code that waits to be typed on a device. It lives for minutes, so it stands here in
-- clear: the page shows it until it is used, and then the row is gone.
create table device_code (
    id           uuid primary key,
    plant_id     uuid        not null references plant,
    code         text        not null,
    kind         text        not null,
    name         text        not null,
    station_id   uuid        references station,
    line_id      uuid        references line,
    lock_minutes int         not null default 0,
    made_at      timestamptz not null,
    made_by      uuid        references person,
    expires_at   timestamptz not null,
    constraint device_code_once unique (plant_id, code),
    constraint device_code_kind_known check (kind in ('tablet', 'wall', 'sender'))
);

-- Who signed in on a device, and when last: readings may be kept under the name of
-- somebody who was there.
create table device_presence (
    device_id uuid        not null references device,
    person_id uuid        not null references person,
    plant_id  uuid        not null references plant,
    at        timestamptz not null,
    primary key (device_id, person_id)
);

alter table person
    add column badge     text,                    -- what the scanner types
    add column pin       text not null default '', -- argon2id, PHC string
    add column erased_at timestamptz,
    add column sessions_since timestamptz;        -- sessions begun before are over: the secret was reset
create unique index person_badge_once on person (plant_id, badge) where badge is not null;

grant select, insert, update on device, device_presence to holdfast_app;
grant select, insert, delete on device_code to holdfast_app;
