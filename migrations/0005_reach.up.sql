-- What is suspect, and what became of it.

-- A gauge check that failed is a line of the matter of each characteristic concerned.
alter table signal drop constraint signal_panel_known,
    add constraint signal_panel_known check (panel in ('location', 'dispersion', 'reading', 'gauge check'));

-- From one good check of a gauge to the next; 0: each check says when the next is.
alter table gauge add column check_days int not null default 0,
    add constraint gauge_check_days_sane check (check_days between 0 and 3660);

create table gauge_check (
    id          uuid primary key,
    plant_id    uuid        not null references plant,
    gauge_id    uuid        not null references gauge,
    at          timestamptz not null,
    good        boolean     not null,
    master      numeric,              -- what the master is, and
    reading     numeric,              -- what the gauge said of it
    note        text        not null default '',
    next_check  date,                 -- as the person said
    recorded_at timestamptz not null,
    person_id   uuid references person,
    digest      bytea       not null
);
create index gauge_check_course on gauge_check (gauge_id, at desc, id desc);

-- Product that is kept aside. The row follows from facts: the opening of its matter or
-- the entry that opened it, and the entries; settled_at is kept so that what is open is
-- found without reading what is not.
create table containment (
    id                uuid primary key,
    plant_id          uuid        not null references plant,
    station_id        uuid        not null references station,
    characteristic_id uuid        not null references characteristic,
    matter_id         uuid references matter, -- none: a person opened it
    opened_at         timestamptz not null,
    settled_at        timestamptz,
    constraint containment_of_matter_once unique (plant_id, matter_id)
);
create index containment_open on containment (plant_id, station_id) where settled_at is null;

-- What people stated: so many put aside, counted again, nothing to keep, and what became
-- of how many. delta is what it adds to the quantity that is kept aside.
create table containment_entry (
    id             uuid primary key,
    plant_id       uuid        not null references plant,
    containment_id uuid        not null references containment,
    step           text        not null,
    quantity       int         not null,
    delta          int         not null,
    place          text        not null default '',
    tag            text        not null default '',
    note           text        not null default '',
    opens          boolean     not null default false,
    recorded_at    timestamptz not null,
    person_id      uuid references person,
    digest         bytea       not null,
    constraint containment_entry_step_known check (step in ('kept', 'recount', 'none', 'released', 'reworked', 'scrapped', 'returned', 'other')),
    constraint containment_entry_quantity_sane check (quantity >= 0)
);
create index containment_entry_course on containment_entry (containment_id, recorded_at, id);

grant select, insert on gauge_check, containment, containment_entry to holdfast_app;
grant update on containment to holdfast_app;
