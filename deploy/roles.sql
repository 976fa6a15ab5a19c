-- Roles on a PostgreSQL server of your own (15 or newer). Run once by an
-- administrator, connected to the database that pkvigil will use:
--
--   createdb --encoding=UTF8 pkvigil
--   psql -v ON_ERROR_STOP=1 -d pkvigil -f deploy/roles.sql
--   psql -d pkvigil -c '\password pkvigil_owner' -c '\password pkvigil_service'
--
-- Then, with the owner's address:   pkvigil schema migrate
-- and the service with the address of pkvigil_service. Running it again changes nothing.
--
--   pkvigil_owner    owns both schemas; only `pkvigil schema migrate` uses it
--   pkvigil_service  the service: reads and writes rows, changes no table
--   pkvigil_reader   a group: may select from schema readout and nothing else
DO $do$
BEGIN
    IF NOT EXISTS (SELECT FROM pg_roles WHERE rolname = 'pkvigil_owner') THEN
        CREATE ROLE pkvigil_owner LOGIN NOSUPERUSER NOCREATEDB NOCREATEROLE;
    END IF;
    IF NOT EXISTS (SELECT FROM pg_roles WHERE rolname = 'pkvigil_service') THEN
        CREATE ROLE pkvigil_service LOGIN NOSUPERUSER NOCREATEDB NOCREATEROLE;
    END IF;
    IF NOT EXISTS (SELECT FROM pg_roles WHERE rolname = 'pkvigil_reader') THEN
        CREATE ROLE pkvigil_reader NOLOGIN;
    END IF;
    EXECUTE format('REVOKE ALL ON DATABASE %I FROM PUBLIC', current_database());
    EXECUTE format('GRANT CONNECT, CREATE, TEMPORARY ON DATABASE %I TO pkvigil_owner', current_database());
    EXECUTE format('GRANT CONNECT, TEMPORARY ON DATABASE %I TO pkvigil_service', current_database());
    EXECUTE format('GRANT CONNECT ON DATABASE %I TO pkvigil_reader', current_database());
    EXECUTE format('ALTER ROLE pkvigil_service IN DATABASE %I SET timezone = ''UTC''', current_database());
END $do$;
REVOKE CREATE ON SCHEMA public FROM PUBLIC;

-- What the owner will make is open to the service, row by row.
ALTER DEFAULT PRIVILEGES FOR ROLE pkvigil_owner GRANT USAGE ON SCHEMAS TO pkvigil_service;
ALTER DEFAULT PRIVILEGES FOR ROLE pkvigil_owner GRANT SELECT, INSERT, UPDATE, DELETE ON TABLES TO pkvigil_service;
ALTER DEFAULT PRIVILEGES FOR ROLE pkvigil_owner GRANT USAGE, SELECT ON SEQUENCES TO pkvigil_service;
ALTER DEFAULT PRIVILEGES FOR ROLE pkvigil_owner GRANT EXECUTE ON FUNCTIONS TO pkvigil_service;

-- A dashboard's login:
--   CREATE ROLE dashboard LOGIN IN ROLE pkvigil_reader;   then \password dashboard
