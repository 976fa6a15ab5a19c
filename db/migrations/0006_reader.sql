-- The group that may read schema readout and nothing else. A role belongs to the whole server, so it may exist already, and on a shared
-- server making it may be forbidden: then an administrator makes it, and the next migration or CreateReader grants the rights.
DO $do$
BEGIN
    IF NOT EXISTS (SELECT FROM pg_roles WHERE rolname = 'pkvigil_reader') THEN
        BEGIN
            CREATE ROLE pkvigil_reader NOLOGIN;
        EXCEPTION
            WHEN duplicate_object OR unique_violation THEN NULL;
            WHEN insufficient_privilege THEN
                RAISE WARNING 'role pkvigil_reader could not be made; ask an administrator for: CREATE ROLE pkvigil_reader NOLOGIN';
        END;
    END IF;
END $do$;
REVOKE ALL ON SCHEMA pkvigil FROM PUBLIC;
REVOKE ALL ON ALL FUNCTIONS IN SCHEMA readout FROM PUBLIC;
REVOKE ALL ON ALL FUNCTIONS IN SCHEMA pkvigil FROM PUBLIC;
