alter table cause drop column retired_at;
drop table matter_verification;
drop table matter_fix;
drop table matter_answer;
alter table signal drop column plan_id, drop column added_at;
drop table reaction_plan;
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
grant select, insert on reaction_plan to holdfast_app;
