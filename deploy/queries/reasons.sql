-- Why are the sets of the newest night held or noted? Worst first.
SELECT set_key, check_key, rung, observed, limit_low, limit_high, unit, outcome, sentence, action
FROM readout.reasons
WHERE night = (SELECT max(night) FROM readout.nights) AND outcome <> 'stands'
ORDER BY outcome = 'stands-noted', set_key, check_key;
