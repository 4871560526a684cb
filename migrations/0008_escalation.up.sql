-- Finding somebody for what nobody takes: rounds that were not taken, the steps of
-- an escalation, a matter quieted for a while, and the messages that leave the box.

-- A round that was found overdue. Which sample is missing names it: that of this
-- characteristic after the one taken at after_taken. So two servers, or one that was
-- started again, find the same round and not a second one.
create table overdue_round (
    id                uuid primary key,
    plant_id          uuid        not null references plant,
    station_id        uuid        not null references station,
    characteristic_id uuid        not null references characteristic,
    after_taken       timestamptz, -- null: there was no sample at all
    due_at            timestamptz not null,
    found_at          timestamptz not null,
    ended_at          timestamptz,
    constraint overdue_round_once unique nulls not distinct (plant_id, characteristic_id, after_taken)
);
create unique index overdue_round_one_open on overdue_round (plant_id, station_id) where ended_at is null;

-- A step that was fired. A fact, and there once: that is what the constraint is for.
create table escalation_step (
    id         uuid primary key,
    plant_id   uuid        not null references plant,
    station_id uuid        not null references station,
    matter_id  uuid        references matter,
    overdue_id uuid        references overdue_round,
    turn       int         not null, -- counted from 0; a matter begins another when it was quieted
    step       int         not null,
    kind       text        not null, -- of the matter when it fired, or 'round'
    fired_at   timestamptz not null,
    constraint escalation_step_once unique nulls not distinct (plant_id, matter_id, overdue_id, turn, step),
    constraint escalation_step_of_one check (num_nonnulls(matter_id, overdue_id) = 1),
    constraint escalation_step_known check (step between 1 and 3 and turn >= 0),
    constraint escalation_kind_known check (kind in ('look', 'hold', 'round'))
);
create index escalation_step_overdue on escalation_step (overdue_id) where overdue_id is not null;
create index escalation_step_course on escalation_step (plant_id, fired_at);

-- A matter quieted until a stated time. Rows are only added; the newest counts, and one
-- that is over at once (until = at) ends the quiet before it.
create table quieting (
    id        uuid primary key,
    plant_id  uuid        not null references plant,
    matter_id uuid        not null references matter,
    kind      text        not null, -- of the matter then; a graver one ends the quiet
    at        timestamptz not null,
    until     timestamptz not null,
    reason    text        not null,
    person_id uuid        not null references person,
    constraint quieting_ends_later check (until >= at),
    constraint quieting_kind_known check (kind in ('look', 'hold'))
);
create index quieting_matter on quieting (matter_id, at);

-- Messages that leave the box, one for each target of a step. They are no record of the
-- process: the step is.
create table outbox (
    id           uuid primary key,
    plant_id     uuid        not null references plant,
    step_id      uuid        references escalation_step,
    target       text        not null,
    title        text        not null,
    body         text        not null, -- as it is sent, each time the same
    created_at   timestamptz not null,
    next_at      timestamptz not null, -- not before; pushed on while somebody tries
    give_up_at   timestamptz not null,
    attempts     int         not null default 0,
    claim        uuid,                 -- of who tries now
    tried_at     timestamptz,
    last_error   text        not null default '',
    delivered_at timestamptz,
    given_up_at  timestamptz,
    constraint outbox_once unique (plant_id, step_id, target),
    constraint outbox_one_end check (delivered_at is null or given_up_at is null)
);
create index outbox_waiting on outbox (plant_id, next_at) where delivered_at is null and given_up_at is null;
create index outbox_given_up on outbox (plant_id, given_up_at) where given_up_at is not null;

-- How it stands with each target: one that fails is left alone for a while, whatever
-- waits for it.
create table outbox_target (
    plant_id     uuid        not null references plant,
    target       text        not null,
    failures     int         not null default 0, -- in a row
    paused_until timestamptz,
    last_ok      timestamptz,
    last_error   text        not null default '',
    failed_at    timestamptz,
    primary key (plant_id, target)
);

-- What alarmed at a station of late.
create index matter_alarmed on matter (station_id, opened_at) where alarmed;

grant select, insert on overdue_round, escalation_step, quieting, outbox, outbox_target to holdfast_app;
grant update on overdue_round, outbox, outbox_target to holdfast_app;
