-- Title: Wavebands in which a target was not looked at
-- Question: For each target and waveband: how many catalogs looked, how many do not cover it, and how many gave no usable answer? Fewest lookers first.
-- Column: target_name |  | Name of the target.
-- Column: waveband |  | Part of the spectrum.
-- Column: looked | count | Catalogs that cover the position and answered.
-- Column: not_covered | count | Catalogs that do not cover it.
-- Column: unknown | count | Catalogs whose coverage there is not known.
-- Column: no_answer | count | Catalogs that gave no usable answer.

SELECT
    target_name,
    waveband,
    sum(CASE WHEN outcome IN ('counterpart', 'ambiguous', 'chance', 'blank', 'hidden', 'partly covered') THEN 1 ELSE 0 END)
        AS looked,
    sum(CASE WHEN outcome = 'not covered' THEN 1 ELSE 0 END) AS not_covered,
    sum(CASE WHEN outcome = 'coverage unknown' THEN 1 ELSE 0 END) AS unknown,
    sum(CASE WHEN outcome IN ('unanswered', 'misread', 'truncated') THEN 1 ELSE 0 END) AS no_answer
FROM current_finding
GROUP BY target_name, waveband
ORDER BY target_name, looked, waveband;
