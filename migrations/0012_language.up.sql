-- The language in which pages speak to a person; empty leaves it to the device. It is a
-- preference: it may change and is not in the ledger.
alter table person add column language text not null default '';
alter table person add constraint person_language_short check (length(language) <= 35);
