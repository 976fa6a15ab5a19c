-- Turnaround: minutes from the last scan to the verdict, per instrument of the newest night.
SELECT instrument, count(*) AS sets, percentile_cont(0.5) WITHIN GROUP (ORDER BY delay_min) AS median_min, max(delay_min) AS longest_min,
       count(*) FILTER (WHERE ph_at IS NULL) AS without_ph
FROM readout.timing
WHERE night = (SELECT max(night) FROM readout.nights)
GROUP BY instrument
ORDER BY instrument;
