-- A gauge check that failed is a line of the matter of each characteristic concerned.
alter table signal drop constraint signal_panel_known,
    add constraint signal_panel_known check (panel in ('location', 'dispersion', 'reading', 'gauge check'));
