-- How did a set's pKa change with each revision? The sets that were computed last, all their results.
SELECT set_key, step, revision, pka, u, verdict, reason, "by", at, is_current
FROM readout.revisions
WHERE set_id IN (SELECT set_id FROM readout.revisions ORDER BY result_id DESC LIMIT 10)
ORDER BY set_key, step, revision;
