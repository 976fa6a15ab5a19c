-- Trend of a product over its lots: the pKa of every lot of a dye, newest last.
SELECT dye, step, lot, measured_night, instrument, pka, u, u_own, u_run, u_lab, lambda_acid_nm, lambda_base_nm, ratio, verdict
FROM readout.lots
WHERE measured_night > (SELECT max(night) FROM readout.nights) - 365
ORDER BY dye, step, measured_night, lot;
