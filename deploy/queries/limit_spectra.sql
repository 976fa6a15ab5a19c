-- The spectra of the forms of one set, one line per wavelength, with two-sided 95 % bands.
SELECT l.species, p.wavelength_nm, p.value, p.value - 2 * p.sd AS low, p.value + 2 * p.sd AS high, l.unit
FROM readout.limit_spectra l
CROSS JOIN LATERAL unnest(l.wavelength_nm, l.value, l.sd) AS p(wavelength_nm, value, sd)
WHERE l.set_id = (SELECT max(set_id) FROM readout.limit_spectra)
ORDER BY l.species, p.wavelength_nm;
