delete from signal where panel = 'gauge check';
alter table signal drop constraint signal_panel_known,
    add constraint signal_panel_known check (panel in ('location', 'dispersion', 'reading'));
