-- How often is each check the reason, and how many such holds were lifted unchanged? A check that is always lifted has a wrong limit.
SELECT month, check_key, n_sets, n_held, n_lifted, n_lifted::float8 / NULLIF(n_held, 0) AS share_lifted
FROM readout.check_use
ORDER BY month DESC, n_held DESC, check_key;
