-- Finds what was open at a recent instant without walking all matters.
create index matter_closed on matter (characteristic_id, closed_at);
