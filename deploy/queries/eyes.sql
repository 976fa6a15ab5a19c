-- Is the system seeing everything right now? One line per folder; minutes since the last stored look.
SELECT root, instrument, visible, why_not_visible, newest_file_at, complete_up_to, files_parked, files_refused, files_settling,
       round(extract(epoch FROM now() - last_poll_at) / 60) AS minutes_since_look
FROM readout.eyes
ORDER BY visible, root;
