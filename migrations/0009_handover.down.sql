drop index matter_station_closed;
drop index matter_station_opened;
drop table daily_root;
drop table handover_read;
drop table shift_note_cleared;
drop table shift_note;
