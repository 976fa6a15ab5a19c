-- Uncertainty budget of the newest result, the largest contribution first.
SELECT result_id, step, component, u, unit, sensitivity, u_pka, dof, bucket, shared_key
FROM readout.budget
WHERE result_id = (SELECT max(result_id) FROM readout.budget)
ORDER BY step, u_pka DESC;
