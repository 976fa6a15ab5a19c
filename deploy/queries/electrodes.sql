-- Electrode life: slopes, potential and response of every calibration.
SELECT electrode, calibrated_at, slope_acid_pct, slope_base_pct, potential7_mv, third_buffer_residual, stable_s, forecast_limit_night, buffer_lots
FROM readout.electrodes
ORDER BY electrode, calibrated_at;
