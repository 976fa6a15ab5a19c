-- Views for dashboards: one row is one thing, units stand in the names, keys never change, columns are only ever added.

-- A file is the newest of its path when nothing replaces it.
CREATE VIEW pkvigil.file_newest AS
SELECT f.* FROM pkvigil.file f WHERE NOT EXISTS (SELECT FROM pkvigil.file n WHERE n.replaces = f.id);

CREATE VIEW readout.eyes AS
SELECT r.root, NULLIF(r.instrument, '') AS instrument, r.visible, NULLIF(r.why, '') AS why_not_visible, r.since AS visible_since,
       r.newest_at AS newest_file_at, r.looked_at AS last_poll_at, r.clock_offset_s,
       (SELECT count(*) FROM pkvigil.file_newest f WHERE f.root = r.root AND f.state = 'parked')::int AS files_parked,
       (SELECT count(*) FROM pkvigil.file_newest f WHERE f.root = r.root AND f.state = 'refused')::int AS files_refused,
       r.settling AS files_settling, r.complete_up_to, l.host AS swept_by_host, l.pid AS swept_by_process
FROM pkvigil.root_state r LEFT JOIN pkvigil.root_lease l ON l.root = r.root;

-- One branch per kind of row and one GROUP BY, so that a condition on night reaches the indexes.
CREATE VIEW readout.nights AS
SELECT x.night, x.instrument, sum(x.planned)::int AS sets_planned, sum(x.seen)::int AS sets_seen, sum(x.ref)::int AS references_seen,
       (count(*) FILTER (WHERE x.verdict = 'stands'))::int AS stands,
       (count(*) FILTER (WHERE x.verdict = 'stands-noted'))::int AS stands_noted,
       (count(*) FILTER (WHERE x.verdict = 'held'))::int AS held,
       (count(*) FILTER (WHERE x.verdict = 'no number'))::int AS no_number,
       (count(*) FILTER (WHERE x.state = 'waiting'))::int AS waiting,
       (count(*) FILTER (WHERE x.state = 'gathering'))::int AS gathering,
       (count(*) FILTER (WHERE x.verdict = 'in-question'))::int AS in_question
FROM (
    SELECT s.night, s.instrument, 0 AS planned, 1 AS seen, (s.kind = 'reference')::int AS ref, t.verdict, s.state
    FROM pkvigil.sample_set s LEFT JOIN pkvigil.standing t ON t.set_id = s.id AND t.current
    UNION ALL
    SELECT p.night, p.instrument, 1, 0, 0, NULL, NULL
    FROM (SELECT DISTINCT p.night, p.instrument, p.set_name, p.slot
          FROM pkvigil.plan_row p JOIN pkvigil.file_newest f ON f.id = p.file_id) p
) x
GROUP BY x.night, x.instrument;

CREATE VIEW readout.release_list AS
SELECT s.id AS set_id, s.key AS set_key, s.night, s.instrument, r.id AS result_id, s.lot, s.compound AS dye, p.step, p.pka, p.u, p.k,
       p.expanded AS u_expanded, t.verdict,
       ARRAY(SELECT c.sentence FROM pkvigil.result_check c WHERE c.result_id = r.id AND c.outcome = 'stands-noted' ORDER BY c.idx) AS notes,
       r.at AS decided_at
FROM pkvigil.standing t
JOIN pkvigil.result r ON r.id = t.result_id
JOIN pkvigil.sample_set s ON s.id = t.set_id
JOIN pkvigil.result_pka p ON p.result_id = r.id
WHERE t.current AND t.verdict IN ('stands', 'stands-noted') AND t.released_at IS NULL AND s.kind = 'sample'
  AND NOT EXISTS (SELECT FROM pkvigil.bracket_set b JOIN pkvigil.bracket k ON k.id = b.bracket_id WHERE b.set_id = s.id AND k.state = 'open')
  AND coalesce((SELECT i.state FROM pkvigil.instrument_state i WHERE i.instrument = s.instrument ORDER BY i.id DESC LIMIT 1), 'open') = 'open';

CREATE VIEW readout.reasons AS
SELECT t.set_id, s.key AS set_key, s.night, s.instrument, t.result_id, t.verdict, c.key AS check_key, NULLIF(c.rung, '') AS rung,
       c.value AS observed, c.limit_low, c.limit_high, c.unit, c.outcome, c.sentence, c.action
FROM pkvigil.standing t
JOIN pkvigil.sample_set s ON s.id = t.set_id
JOIN pkvigil.result_check c ON c.result_id = t.result_id
WHERE t.current;

CREATE VIEW readout.gaps AS
SELECT s.id AS set_id, s.key AS set_key, s.night, s.instrument, s.state, m ->> 'role' AS missing_role, NULLIF(m ->> 'rung', '') AS missing_rung,
       (SELECT max(h.at) FROM pkvigil.set_state h WHERE h.set_id = s.id) AS since, s.deadline AS deadline_at
FROM pkvigil.sample_set s CROSS JOIN LATERAL jsonb_array_elements(s.missing) m
WHERE s.state IN ('gathering', 'waiting');

CREATE VIEW readout.provenance AS
SELECT i.result_id, r.set_id, encode(f.sha256, 'hex') AS file_hash, f.root, f.path, i.role, NULLIF(i.rung, '') AS rung,
       f.seen_at AS first_seen_at, f.size AS size_bytes, f.match ->> 'rule' AS rule, i.used, NULLIF(i.left_out_why, '') AS left_out_why,
       f.revision AS file_revision, r.set_revision AS revision, t.current AS is_current
FROM pkvigil.result_input i
JOIN pkvigil.file f ON f.id = i.file_id
JOIN pkvigil.result r ON r.id = i.result_id
JOIN pkvigil.standing t ON t.result_id = r.id;

CREATE VIEW readout.revisions AS
SELECT r.set_id, s.key AS set_key, r.id AS result_id, dense_rank() OVER (PARTITION BY r.set_id ORDER BY r.id)::int AS revision,
       p.step, p.pka, p.u, t.verdict, r.because AS reason, r.by, r.at, t.current AS is_current
FROM pkvigil.result r
JOIN pkvigil.sample_set s ON s.id = r.set_id
JOIN pkvigil.standing t ON t.result_id = r.id
LEFT JOIN pkvigil.result_pka p ON p.result_id = r.id;

CREATE VIEW readout.chart_points AS
SELECT p.id AS point_id, p.scope_kind, p.scope, CASE WHEN p.scope_kind = 'instrument' THEN p.scope END AS instrument,
       NULLIF(p.reference, '') AS reference, NULLIF(p.ref_lot, '') AS ref_lot, p.characteristic, p.unit, p.at, p.night, p.value, p.sd AS value_sd,
       j.centre, j.sd, j.limit_low, j.limit_high, j.ewma, j.ewma_low, j.ewma_high, j.cusum_high, j.cusum_low, j.cusum_limit,
       NULLIF(array_to_string(j.flags, ', '), '') AS flag, j.baseline_id, p.judged, p.result_id
FROM pkvigil.point p
LEFT JOIN LATERAL (SELECT * FROM pkvigil.point_judgement j WHERE j.point_id = p.id ORDER BY j.id DESC LIMIT 1) j ON true
LEFT JOIN pkvigil.standing t ON t.result_id = p.result_id
WHERE p.result_id IS NULL OR (t.current AND NOT t.struck);

CREATE VIEW pkvigil.case_now AS
SELECT c.id, c.key, c.resource, c.instrument, c.opened_at, z.id AS state_id, z.at, z.actor, z.because, z.state, z.cause, z.class, z.shape,
       z.onset_low, z.onset_best, z.onset_high, z.size, z.size_sd, z.unit, z.sentence, z.impact, z.next_check, z.evaluation
FROM pkvigil.drift_case c
JOIN LATERAL (SELECT * FROM pkvigil.case_state z WHERE z.case_id = c.id ORDER BY z.id DESC LIMIT 1) z ON true;

CREATE VIEW readout.cases AS
SELECT c.id AS case_id, c.key AS case_key, c.state, c.resource, NULLIF(c.instrument, '') AS instrument, c.cause, c.class, c.shape,
       c.onset_low AS onset_low_night, c.onset_best AS onset_best_night, c.onset_high AS onset_high_night,
       c.onset_low::timestamp AT TIME ZONE 'UTC' AS onset_low_at, c.onset_best::timestamp AT TIME ZONE 'UTC' AS onset_best_at,
       c.onset_high::timestamp AT TIME ZONE 'UTC' AS onset_high_at,
       c.size, c.size_sd, c.unit, c.impact, c.sentence, c.next_check, c.opened_at,
       CASE WHEN c.state = 'closed' THEN c.at END AS closed_at, c.at AS changed_at, c.actor AS changed_by
FROM pkvigil.case_now c;

CREATE VIEW readout.causes AS
SELECT k.case_id, k.at AS evaluated_at, k.rank, k.cause, k.resource, k.probability, k.log_bayes, k.size, k.size_sd, k.unit,
       k.evidence_for, k.evidence_against
FROM pkvigil.case_ranking k
WHERE k.at = (SELECT max(x.at) FROM pkvigil.case_ranking x WHERE x.case_id = k.case_id);

CREATE VIEW readout.reach AS
SELECT DISTINCT ON (h.case_id, h.result_id, p.step)
       h.case_id, h.result_id, s.id AS set_id, s.key AS set_key, s.night, s.instrument, s.lot, t.released_at, p.step, p.pka,
       h.impact, h.impact_upper, p.u, h.resolution, t.verdict, h.at AS evaluated_at
FROM pkvigil.case_reach h
JOIN pkvigil.result r ON r.id = h.result_id
JOIN pkvigil.sample_set s ON s.id = r.set_id
JOIN pkvigil.standing t ON t.result_id = r.id
LEFT JOIN pkvigil.result_pka p ON p.result_id = r.id
ORDER BY h.case_id, h.result_id, p.step, h.id DESC;

CREATE VIEW readout.scans AS
SELECT m.set_id, c.id AS scan_id, m.role, NULLIF(m.rung, '') AS rung, NULLIF(m.rep, '') AS replicate,
       coalesce(g.ph_read, m.ph) AS ph, c.measured_at, w.wavelength_nm,
       ARRAY(SELECT NULLIF(a.x, 'NaN') FROM unnest(c.absorbance) WITH ORDINALITY a(x, i) ORDER BY a.i) AS absorbance,
       coalesce(i.used, m.active) AS used, coalesce(NULLIF(i.left_out_why, ''), NULLIF(m.left_out_why, '')) AS left_out_why
FROM pkvigil.member m
JOIN pkvigil.scan c ON c.id = m.scan_id
JOIN pkvigil.grid w ON w.sha256 = c.grid
LEFT JOIN pkvigil.standing t ON t.set_id = m.set_id AND t.current
LEFT JOIN LATERAL (SELECT x.used, x.left_out_why FROM pkvigil.result_input x WHERE x.result_id = t.result_id AND x.scan_id = c.id LIMIT 1) i ON true
LEFT JOIN LATERAL (SELECT x.ph_read FROM pkvigil.result_rung x WHERE x.result_id = t.result_id AND x.key = m.rung LIMIT 1) g ON m.rung <> '';

CREATE VIEW readout.limit_spectra AS
SELECT t.set_id, x.result_id, x.species, w.wavelength_nm,
       ARRAY(SELECT NULLIF(a.v, 'NaN') FROM unnest(x.value) WITH ORDINALITY a(v, i) ORDER BY a.i) AS value,
       ARRAY(SELECT NULLIF(a.v, 'NaN') FROM unnest(x.sd) WITH ORDINALITY a(v, i) ORDER BY a.i) AS sd,
       CASE WHEN x.molar THEN 'L/(mol cm)' ELSE 'absorbance' END AS unit
FROM pkvigil.standing t
JOIN pkvigil.result_spectrum x ON x.result_id = t.result_id
JOIN pkvigil.grid w ON w.sha256 = x.grid
WHERE t.current;

CREATE VIEW readout.rungs AS
SELECT t.set_id, g.result_id, g.key AS rung, g.ph_read, g.ph_latent, g.residual, g.u, g.amount_factor_pct, g.baseline_mau,
       g.left_out, NULLIF(g.left_out_why, '') AS left_out_why
FROM pkvigil.standing t JOIN pkvigil.result_rung g ON g.result_id = t.result_id
WHERE t.current;

CREATE VIEW readout.lots AS
SELECT s.compound AS dye, s.lot, s.night AS measured_night, s.instrument, s.id AS set_id, t.result_id, p.step, p.pka, p.u, p.u_own, p.u_run, p.u_lab,
       r.lambda_acid_nm, r.lambda_base_nm, r.ratio, t.verdict, t.released_at
FROM pkvigil.standing t
JOIN pkvigil.sample_set s ON s.id = t.set_id
JOIN pkvigil.result r ON r.id = t.result_id
JOIN pkvigil.result_pka p ON p.result_id = t.result_id
WHERE t.current AND NOT t.struck AND s.kind = 'sample';

CREATE VIEW pkvigil.reference_now AS
SELECT s.compound AS reference, s.night, s.instrument, t.result_id
FROM pkvigil.standing t JOIN pkvigil.sample_set s ON s.id = t.set_id
WHERE t.current AND s.kind = 'reference' AND t.verdict IN ('stands', 'stands-noted', 'in-question');

CREATE VIEW pkvigil.reference_mean AS
SELECT r.reference, r.night, r.instrument, p.step, avg(p.pka) AS pka, count(*) AS n
FROM pkvigil.reference_now r JOIN pkvigil.result_pka p ON p.result_id = r.result_id
GROUP BY r.reference, r.night, r.instrument, p.step;

-- Equal keys are equal errors, so the variance of a difference sums over keys: what both share cancels as far as the sensitivities agree.
CREATE VIEW readout.pairs AS
SELECT a.reference, a.night, a.step, a.instrument AS instrument_a, b.instrument AS instrument_b, a.pka - b.pka AS difference, d.u AS u_difference,
       a.n::int AS sets_a, b.n::int AS sets_b
FROM pkvigil.reference_mean a
JOIN pkvigil.reference_mean b ON b.reference = a.reference AND b.night = a.night AND b.step = a.step AND a.instrument < b.instrument
CROSS JOIN LATERAL (
    SELECT sqrt(sum(k.cu * k.cu)) AS u FROM (
        SELECT sum(c.c * c.u * CASE WHEN r.instrument = a.instrument THEN 1.0 / a.n ELSE -1.0 / b.n END) AS cu
        FROM pkvigil.reference_now r JOIN pkvigil.result_component c ON c.result_id = r.result_id AND c.step = a.step
        WHERE r.reference = a.reference AND r.night = a.night AND r.instrument IN (a.instrument, b.instrument)
        GROUP BY CASE WHEN c.shared THEN c.key ELSE 'own:' || c.result_id || ':' || c.idx END) k) d;

CREATE VIEW readout.electrodes AS
SELECT c.electrode, c.id AS calibration_id, c.measured_at AS calibrated_at, f.slope_acid_pct, f.slope_base_pct, f.potential7_mv,
       f.third_buffer_residual, f.stable_s, f.forecast_limit_night,
       ARRAY(SELECT p.lot FROM pkvigil.calibration_point p WHERE p.calibration_id = c.id ORDER BY p.idx) AS buffer_lots
FROM pkvigil.calibration c
JOIN pkvigil.file_newest n ON n.id = c.file_id
LEFT JOIN LATERAL (SELECT * FROM pkvigil.calibration_figures f WHERE f.calibration_id = c.id ORDER BY f.id DESC LIMIT 1) f ON true;

CREATE VIEW readout.buffers AS
WITH used AS (
    SELECT p.lot, p.ph, c.measured_at, c.electrode, r.instrument
    FROM pkvigil.calibration_point p
    JOIN pkvigil.calibration c ON c.id = p.calibration_id
    JOIN pkvigil.file_newest f ON f.id = c.file_id
    LEFT JOIN pkvigil.root_state r ON r.root = f.root
    WHERE p.lot <> ''
)
SELECT u.lot AS buffer_lot, (percentile_cont(0.5) WITHIN GROUP (ORDER BY u.ph)) AS nominal_ph,
       min(u.measured_at) AS first_used_at, max(u.measured_at) AS last_used_at, count(*)::int AS times_used,
       ARRAY(SELECT DISTINCT x FROM (
           SELECT v.instrument FROM used v WHERE v.lot = u.lot AND v.instrument <> ''
           UNION SELECT unnest(e.instruments) FROM pkvigil.event e WHERE e.resource = u.lot
           UNION SELECT unnest(e.instruments) FROM pkvigil.event e JOIN used v ON v.lot = u.lot AND e.kind = 'electrode' AND e.resource = v.electrode
       ) q(x) ORDER BY x) AS instruments,
       array_agg(DISTINCT u.electrode) AS electrodes,
       (SELECT k.size FROM readout.causes k WHERE k.rank = 1 AND k.resource = u.lot ORDER BY k.evaluated_at DESC LIMIT 1) AS implied_error,
       (SELECT k.size_sd FROM readout.causes k WHERE k.rank = 1 AND k.resource = u.lot ORDER BY k.evaluated_at DESC LIMIT 1) AS u_implied
FROM used u GROUP BY u.lot;

CREATE VIEW readout.check_use AS
SELECT date_trunc('month', s.night)::date AS month, c.key AS check_key, count(DISTINCT s.id)::int AS n_sets,
       count(DISTINCT s.id) FILTER (WHERE c.outcome = 'held')::int AS n_held,
       count(DISTINCT s.id) FILTER (WHERE c.outcome = 'held' AND t.lifted)::int AS n_lifted
FROM pkvigil.standing t
JOIN pkvigil.sample_set s ON s.id = t.set_id
JOIN pkvigil.result_check c ON c.result_id = t.result_id
WHERE t.current
GROUP BY 1, 2;

CREATE VIEW readout.budget AS
SELECT c.result_id, c.step, c.name AS component, c.u, c.unit, c.c AS sensitivity, abs(c.c) * c.u AS u_pka, c.dof,
       CASE WHEN c.shared THEN c.key END AS shared_key, c.bucket
FROM pkvigil.result_component c;

CREATE FUNCTION readout.differences(result_a bigint, result_b bigint)
RETURNS TABLE (result_a_id bigint, result_b_id bigint, step int, difference float8, u_difference float8, shared_keys text[])
LANGUAGE sql STABLE SECURITY DEFINER SET search_path = pkvigil, pg_temp AS $$
    WITH part AS (
        SELECT c.step, CASE WHEN c.shared THEN c.key ELSE 'own:' || c.result_id || ':' || c.idx END AS key, c.shared,
               sum(CASE WHEN c.result_id = $1 THEN c.c * c.u ELSE -c.c * c.u END) AS cu, count(DISTINCT c.result_id) AS owners
        FROM result_component c WHERE c.result_id IN ($1, $2) AND $1 <> $2
        GROUP BY 1, 2, 3
    )
    SELECT $1, $2, a.step, a.pka - b.pka,
           coalesce((SELECT sqrt(sum(p.cu * p.cu)) FROM part p WHERE p.step = a.step), 0),
           ARRAY(SELECT p.key FROM part p WHERE p.step = a.step AND p.shared AND p.owners = 2 ORDER BY p.key)
    FROM result_pka a JOIN result_pka b ON b.result_id = $2 AND b.step = a.step
    WHERE a.result_id = $1
    ORDER BY a.step
$$;

CREATE VIEW readout.timing AS
SELECT s.id AS set_id, s.key AS set_key, s.night, s.instrument, s.last_scan_at, s.ph_at, s.completed_at,
       (SELECT min(x.at) FROM pkvigil.result x WHERE x.set_id = s.id) AS fitted_at, r.at AS verdict_at,
       round((extract(epoch FROM r.at - s.last_scan_at) / 60)::numeric, 2)::float8 AS delay_min
FROM pkvigil.sample_set s
LEFT JOIN pkvigil.standing t ON t.set_id = s.id AND t.current
LEFT JOIN pkvigil.result r ON r.id = t.result_id;

CREATE VIEW readout.deeds AS
SELECT d.seq, d.at, d.actor, d.os_user, d.action, d.object, d.before, d.after, d.because AS reason,
       encode(c.sha256, 'hex') AS config_hash, d.program AS program_version, encode(d.hash, 'hex') AS entry_hash
FROM pkvigil.deed d LEFT JOIN pkvigil.settings c ON c.id = d.settings_id;

CREATE VIEW readout.z_check AS
WITH z AS (
    SELECT s.compound AS reference, s.instrument, s.night, (p.pka - p.assigned) / sqrt(p.u * p.u + coalesce(p.u_assigned * p.u_assigned, 0)) AS z
    FROM pkvigil.standing t
    JOIN pkvigil.sample_set s ON s.id = t.set_id
    JOIN pkvigil.result_pka p ON p.result_id = t.result_id
    WHERE t.current AND NOT t.struck AND s.kind = 'reference' AND p.assigned IS NOT NULL AND t.verdict <> 'held'
)
SELECT z.reference, z.instrument, w.window_nights, count(*)::int AS n, avg(z.z) AS mean_z, stddev_samp(z.z) AS sd_z
FROM z CROSS JOIN (VALUES (30), (90), (365)) w(window_nights)
WHERE z.night > (SELECT max(night) FROM pkvigil.sample_set) - w.window_nights
GROUP BY 1, 2, 3;

CREATE VIEW readout.brackets AS
SELECT b.key AS run_id, b.instrument, b.night, o.key AS opened_by_set, c.key AS closed_by_set, b.state AS bracket_state,
       s.id AS set_id, t.result_id, t.verdict
FROM pkvigil.bracket b
LEFT JOIN pkvigil.sample_set o ON o.id = b.opened_by_set
LEFT JOIN pkvigil.sample_set c ON c.id = b.closed_by_set
LEFT JOIN pkvigil.bracket_set x ON x.bracket_id = b.id
LEFT JOIN pkvigil.sample_set s ON s.id = x.set_id
LEFT JOIN pkvigil.standing t ON t.set_id = s.id AND t.current;

CREATE VIEW readout.strays AS
SELECT f.root, f.path, f.seen_at, NULLIF(f.nearest_rule, '') AS nearest_rule, NULLIF(f.nearest_set, '') AS nearest_set,
       f.distance AS edit_distance, f.reason ->> 'sentence' AS sentence
FROM pkvigil.file_newest f WHERE f.state = 'parked';
