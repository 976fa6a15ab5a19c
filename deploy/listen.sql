-- A session that hears of news. Run it with any login of the group pkvigil_reader:
--
--   psql "postgres://dashboard@server/pkvigil" -f deploy/listen.sql
--
-- psql shows notices when it next talks to the server, so the last line asks every
-- five seconds. A program does better with the waiting call of its driver. A notice
-- is a hint that something is new; what is new is in the views. What happened while
-- nobody listened is not told again: ask the views when you connect.
LISTEN pkvigil_file;    -- {"root": "U1", "files": 12}          files were taken in
LISTEN pkvigil_result;  -- {"set": 4, "result": 217, "verdict": "held"}
LISTEN pkvigil_case;    -- {"case": 3, "state": "open"}
SELECT now() AS at, (SELECT max(verdict_at) FROM readout.timing) AS newest_verdict \watch 5
