-- Who did what? The newest entries of the trail.
SELECT seq, at, actor, os_user, action, object, reason, before, after, program_version
FROM readout.deeds
ORDER BY seq DESC
LIMIT 100;
