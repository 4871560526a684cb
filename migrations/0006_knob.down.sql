alter table change
    drop constraint change_knob_whole,
    drop constraint change_knob_known,
    drop column moves,
    drop column turned,
    drop column knob_version,
    drop column knob_id;
drop table knob;
