-- Which results do the open cases touch, and by how much? Released ones first: somebody must be told.
SELECT h.case_id, h.set_key, h.lot, h.step, h.pka, h.u, h.impact, h.impact_upper, h.released_at, h.resolution
FROM readout.reach h
JOIN readout.cases c USING (case_id)
WHERE c.state <> 'closed'
ORDER BY h.released_at IS NULL, abs(h.impact) DESC;
