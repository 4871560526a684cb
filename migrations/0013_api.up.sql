-- Readings from outside: which device sent a round, and what came that could not be
-- taken, so that the station can show it in its own language until a person clears it.

alter table round add column device_id uuid references device;

alter table set_aside
    add column device_id uuid references device,
    add column format    text  not null default '',   -- the sentence of why, without its arguments
    add column args      jsonb not null default '[]'; -- these
create index set_aside_open on set_aside (station_id, came_at desc, id desc) where settled_at is null;
