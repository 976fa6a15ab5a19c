-- Do the references agree with their assigned values within the budget? sd_z near 1 says that the uncertainties are honest.
SELECT reference, instrument, window_nights, n, mean_z, sd_z
FROM readout.z_check
ORDER BY window_nights, reference, instrument;
