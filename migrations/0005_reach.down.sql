drop table containment_entry, containment, gauge_check;
alter table gauge drop constraint gauge_check_days_sane, drop column check_days;
delete from signal where panel = 'gauge check';
alter table signal drop constraint signal_panel_known,
    add constraint signal_panel_known check (panel in ('location', 'dispersion', 'reading'));
