-- What is missing for the sets that wait? The oldest deadline first.
SELECT set_key, state, missing_role, missing_rung, since, deadline_at
FROM readout.gaps
ORDER BY deadline_at NULLS LAST, set_key, missing_role, missing_rung;
