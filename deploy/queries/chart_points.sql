-- Control chart of one reference on one instrument: its pKa, the last 60 nights.
SELECT at, night, value, centre, limit_low, limit_high, ewma, ewma_low, ewma_high, flag, baseline_id, ref_lot
FROM readout.chart_points
WHERE characteristic = 'pka' AND judged
  AND (instrument, reference) = (SELECT instrument, reference FROM readout.chart_points WHERE characteristic = 'pka' AND reference IS NOT NULL ORDER BY at DESC LIMIT 1)
  AND night > (SELECT max(night) FROM readout.nights) - 60
ORDER BY at;
