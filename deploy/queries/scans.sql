-- The spectra of one set. Arrays are large: always name the set.
SELECT role, rung, replicate, ph, measured_at, wavelength_nm, absorbance, used, left_out_why
FROM readout.scans
WHERE set_id = (SELECT max(set_id) FROM readout.limit_spectra)
ORDER BY ph NULLS FIRST, rung;
