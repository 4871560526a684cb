drop table person_name;
alter table device drop column language;
