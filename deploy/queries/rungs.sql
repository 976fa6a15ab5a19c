-- pH residual of each rung of one set: latent minus read, in pH.
SELECT rung, ph_read, ph_latent, residual, u, amount_factor_pct, baseline_mau, left_out, left_out_why
FROM readout.rungs
WHERE set_id = (SELECT max(set_id) FROM readout.rungs)
ORDER BY ph_read;
