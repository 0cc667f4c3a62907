-- Roles of the book. Run once in the book's database by an administrator of the server; harmless when
-- repeated. Roles get no password here: set them, or let pg_hba.conf decide who may be whom.
--
-- recon_owner    owns every object; nobody logs in as it
-- recon_migrate  becomes the owner; for `recon database upgrade` only
-- recon_job      the service: adds rows, changes only claims, pointers, watermarks and progress
-- recon_web      pages and deciding persons: reads, adds decisions, approvals and steps of a month
-- recon_reader   spreadsheets and reporting tools: the views, nothing else
DO $$
DECLARE
    name text;
BEGIN
    FOREACH name IN ARRAY ARRAY['recon_owner', 'recon_migrate', 'recon_job', 'recon_web', 'recon_reader'] LOOP
        IF NOT EXISTS (SELECT 1 FROM pg_roles WHERE rolname = name) THEN
            EXECUTE format('CREATE ROLE %I NOSUPERUSER NOCREATEDB NOCREATEROLE NOREPLICATION NOINHERIT', name);
        END IF;
    END LOOP;
    EXECUTE format('REVOKE ALL ON DATABASE %I FROM PUBLIC', current_database());
    EXECUTE format('GRANT CONNECT ON DATABASE %I TO recon_migrate, recon_job, recon_web, recon_reader', current_database());
END
$$;
ALTER ROLE recon_migrate LOGIN;
ALTER ROLE recon_job LOGIN;
ALTER ROLE recon_web LOGIN;
ALTER ROLE recon_reader LOGIN;
GRANT recon_owner TO recon_migrate;

REVOKE ALL ON SCHEMA public FROM PUBLIC;
GRANT USAGE, CREATE ON SCHEMA public TO recon_owner;
GRANT USAGE ON SCHEMA public TO recon_migrate, recon_job, recon_web, recon_reader;

ALTER ROLE recon_migrate SET search_path = public;
ALTER ROLE recon_job SET search_path = public;
ALTER ROLE recon_web SET search_path = public;
ALTER ROLE recon_reader SET search_path = public;
ALTER ROLE recon_job SET statement_timeout = '10min';
ALTER ROLE recon_web SET statement_timeout = '30s';
ALTER ROLE recon_reader SET statement_timeout = '2min';
ALTER ROLE recon_job SET lock_timeout = '30s';
ALTER ROLE recon_web SET lock_timeout = '10s';
ALTER ROLE recon_reader SET lock_timeout = '10s';
ALTER ROLE recon_job SET idle_in_transaction_session_timeout = '5min';
ALTER ROLE recon_web SET idle_in_transaction_session_timeout = '1min';
ALTER ROLE recon_reader SET idle_in_transaction_session_timeout = '1min';
ALTER ROLE recon_reader SET default_transaction_read_only = on;
