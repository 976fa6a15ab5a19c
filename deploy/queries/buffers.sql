-- Buffer lots: who used them, when, and what error the newest case implies.
SELECT buffer_lot, nominal_ph, first_used_at, last_used_at, times_used, instruments, electrodes, implied_error, u_implied
FROM readout.buffers
ORDER BY last_used_at DESC, buffer_lot;
