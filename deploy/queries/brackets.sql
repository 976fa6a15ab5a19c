-- Which results lie in a bracket that is open or failed? All brackets of the newest night.
SELECT run_id, instrument, opened_by_set, closed_by_set, bracket_state, count(result_id) AS results
FROM readout.brackets
WHERE night = (SELECT max(night) FROM readout.nights)
GROUP BY run_id, instrument, opened_by_set, closed_by_set, bracket_state
ORDER BY run_id;
