-- Which files fit no rule, and what is nearest?
SELECT root, path, seen_at, nearest_rule, nearest_set, edit_distance, sentence
FROM readout.strays
ORDER BY seen_at DESC
LIMIT 200;
