alter table person drop column badge, drop column pin, drop column erased_at, drop column sessions_since;
drop table device_presence;
drop table device_code;
drop table device;
