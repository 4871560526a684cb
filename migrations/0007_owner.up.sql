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
