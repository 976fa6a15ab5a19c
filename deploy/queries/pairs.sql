-- Are two instruments equal? Differences of the same reference on the same night, in multiples of their uncertainty.
SELECT reference, step, night, instrument_a, instrument_b, difference, u_difference, difference / NULLIF(u_difference, 0) AS in_u, sets_a, sets_b
FROM readout.pairs
WHERE night > (SELECT max(night) FROM readout.nights) - 30
ORDER BY reference, step, night, instrument_a, instrument_b;
