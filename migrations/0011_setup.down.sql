drop table description;
alter table plant drop column confirmed_at;
delete from shift where retired_at is not null;
drop index shift_name_once;
drop index shift_start_once;
alter table shift drop column retired_at,
    add constraint shift_name_once unique (plant_id, name),
    add constraint shift_start_once unique (plant_id, starts);
alter table characteristic drop column retired_at;
alter table gauge drop column retired_at;
alter table part drop column retired_at;
alter table stream drop column retired_at;
alter table machine drop column retired_at;
alter table station drop column retired_at;
alter table line drop column retired_at;
