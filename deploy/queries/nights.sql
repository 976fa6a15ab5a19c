-- What happened last night, in counts? The newest night, instrument by instrument.
SELECT *
FROM readout.nights
WHERE night = (SELECT max(night) FROM readout.nights)
ORDER BY instrument;

-- The last two weeks as a series: share of sets that stand without a person looking.
SELECT night, sum(stands + stands_noted)::float8 / NULLIF(sum(sets_seen), 0) AS share_standing, sum(held) AS held
FROM readout.nights
WHERE night > (SELECT max(night) FROM readout.nights) - 14
GROUP BY night
ORDER BY night;
