-- Can two results be called different? The two newest releasable results of one dye; beyond 2 u the answer is yes at 95 %.
SELECT a.lot AS lot_a, b.lot AS lot_b, d.step, d.difference, d.u_difference, abs(d.difference) > 2 * d.u_difference AS different, d.shared_keys
FROM (SELECT a.result_id AS a, b.result_id AS b
      FROM readout.lots a JOIN readout.lots b ON b.dye = a.dye AND b.result_id > a.result_id
      ORDER BY b.result_id DESC, a.result_id DESC LIMIT 1) n
CROSS JOIN LATERAL readout.differences(n.a, n.b) d
JOIN readout.lots a ON a.result_id = n.a AND a.step = d.step
JOIN readout.lots b ON b.result_id = n.b AND b.step = d.step;
