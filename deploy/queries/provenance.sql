-- Which files made the newest result?
SELECT result_id, role, rung, root, path, file_revision, rule, used, left_out_why, file_hash
FROM readout.provenance
WHERE result_id = (SELECT max(result_id) FROM readout.provenance)
ORDER BY role, rung, path;

-- Which results came from one file? Put its hash in the place of the inner query.
SELECT result_id, revision, is_current
FROM readout.provenance
WHERE file_hash = (SELECT file_hash FROM readout.provenance ORDER BY result_id DESC LIMIT 1)
ORDER BY result_id;
