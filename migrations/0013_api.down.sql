drop index set_aside_open;
alter table set_aside drop column device_id, drop column format, drop column args;
alter table round drop column device_id;
