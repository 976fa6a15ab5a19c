-- Is it electrode, buffer, lamp, ...? The candidates of every open case.
SELECT k.case_id, k.rank, k.cause, k.resource, k.probability, k.log_bayes, k.size, k.size_sd, k.unit, k.evidence_for, k.evidence_against
FROM readout.causes k
JOIN readout.cases c USING (case_id)
WHERE c.state <> 'closed'
ORDER BY k.case_id, k.rank;
