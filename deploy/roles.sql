-- Makes the two roles and the database of Holdfast on a PostgreSQL server of your
-- own, version 15 or newer. Run it once, as a superuser of that server:
--
--   HOLDFAST_OWNER_PASSWORD=... HOLDFAST_APP_PASSWORD=... psql -f deploy/roles.sql postgres
--
-- holdfast      owns the database and migrates it (DATABASE_OWNER_URL)
-- holdfast_app  does the daily work and may not change what is recorded (DATABASE_URL)
--
-- The passwords come from the environment, so that they stand in no file and in
-- no list of processes. docker-compose.yml runs this file when it makes the server.

\set ON_ERROR_STOP on
\getenv owner_password HOLDFAST_OWNER_PASSWORD
\getenv app_password HOLDFAST_APP_PASSWORD
\if :{?owner_password}
\else
  \set owner_password ''
\endif
\if :{?app_password}
\else
  \set app_password ''
\endif

select length(:'owner_password') < 16 or length(:'app_password') < 16 as too_short \gset
\if :too_short
  do $$ begin
    raise exception 'HOLDFAST_OWNER_PASSWORD and HOLDFAST_APP_PASSWORD must be set, with 16 characters or more each';
  end $$;
\endif

create role holdfast login password :'owner_password';
create role holdfast_app login password :'app_password';

create database holdfast owner holdfast
  template template0 encoding 'UTF8' lc_collate 'C.UTF-8' lc_ctype 'C.UTF-8';
revoke connect on database holdfast from public;
grant connect on database holdfast to holdfast_app;
