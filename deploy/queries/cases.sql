-- Since when is it drifting, and what is it? Open cases, the most harmful first.
SELECT case_id, state, resource, instrument, cause, shape, onset_low_night, onset_best_night, onset_high_night, size, size_sd, unit, impact, sentence, next_check
FROM readout.cases
WHERE state <> 'closed'
ORDER BY abs(impact) DESC NULLS LAST, case_id;
