-- Which results may be released now? Notes are sentences that go with the number.
SELECT set_key, lot, dye, step, pka, u_expanded, k, verdict, notes, decided_at
FROM readout.release_list
ORDER BY decided_at DESC, set_key, step
LIMIT 200;
