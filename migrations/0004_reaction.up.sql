-- What to do about a signal: by characteristic, by family of stations or for the whole
-- plant, and by kind of matter; versioned. Nothing was kept in the table before.
drop table reaction_plan;
create table reaction_plan (
    id                uuid primary key, -- of this version
    plant_id          uuid        not null references plant,
    characteristic_id uuid        references characteristic, -- of one characteristic, or
    family            text        not null default '',       -- of a family of stations, or of the plant when both are empty
    kind              text        not null,
    version           int         not null,
    withdrawn         boolean     not null default false,    -- from here on the next wider plan counts again
    steps             jsonb       not null,
    confirm           boolean     not null, -- a round must confirm the fix
    verify            boolean     not null, -- a second person must verify it
    made_at           timestamptz not null,
    person_id         uuid        references person,
    constraint reaction_plan_scope check (characteristic_id is null or family = ''),
    constraint reaction_plan_kind_known check (kind in ('reading', 'gauge check', 'location up', 'location down', 'location pattern', 'dispersion', 'overdue'))
);
create unique index reaction_plan_version_once on reaction_plan
    (plant_id, kind, family, coalesce(characteristic_id, '00000000-0000-0000-0000-000000000000'::uuid), version);

-- The plan that was in force when a signal joined its matter.
alter table signal add column plan_id uuid references reaction_plan,
    add column added_at timestamptz;

-- Each answer to a step, as it was given; answering again adds a row.
create table matter_answer (
    id        uuid primary key,
    plant_id  uuid        not null references plant,
    matter_id uuid        not null references matter,
    plan_id   uuid        not null references reaction_plan,
    attempt   int         not null, -- from 1: a fix that did not hold begins the next
    step      int         not null, -- of the plan, from 1
    remedy    boolean     not null, -- to what is to be done when the answer was not as it should be
    seq       int         not null, -- from 1: answered again
    said      text        not null,
    value     numeric,
    note      text        not null default '',
    at        timestamptz not null,
    person_id uuid        not null references person,
    digest    bytea       not null,
    constraint matter_answer_once unique (plant_id, matter_id, plan_id, attempt, step, remedy, seq),
    constraint matter_answer_said_known check (said in ('done', 'yes', 'no', 'value', 'skipped'))
);
create index matter_answer_matter on matter_answer (matter_id);

-- What was found and done. A matter that its plan keeps open after it may see several.
create table matter_fix (
    id         uuid primary key,
    plant_id   uuid        not null references plant,
    matter_id  uuid        not null references matter,
    number     int         not null,
    cause_id   uuid,
    cause      text        not null,
    action     text        not null,
    restart_at timestamptz, -- where the chart starts afresh; none after only Hold lines and nothing done
    at         timestamptz not null,
    person_id  uuid        not null references person,
    constraint matter_fix_once unique (plant_id, matter_id, number)
);
create index matter_fix_matter on matter_fix (matter_id);

-- A second person's word on a fix.
create table matter_verification (
    id        uuid primary key,
    plant_id  uuid        not null references plant,
    matter_id uuid        not null references matter,
    fix_id    uuid        not null references matter_fix,
    accepted  boolean     not null,
    note      text        not null default '',
    at        timestamptz not null,
    person_id uuid        not null references person,
    constraint matter_verification_once unique (plant_id, fix_id)
);
create index matter_verification_matter on matter_verification (matter_id);

alter table cause add column retired_at timestamptz;

grant select, insert on reaction_plan, matter_answer, matter_fix, matter_verification to holdfast_app;
