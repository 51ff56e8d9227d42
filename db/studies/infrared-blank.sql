-- Title: Targets that are blank in every infrared catalog
-- Question: Which targets have nothing in any near- or mid-infrared catalog that looked there, and in how many?
-- Column: target_name |  | Name of the target.
-- Column: catalogs | count | Infrared catalogs that give the target as blank.
-- Column: not_looked | count | Infrared catalogs that do not cover it or did not answer.

SELECT
    target_name,
    sum(CASE WHEN outcome = 'blank' THEN 1 ELSE 0 END) AS catalogs,
    sum(CASE WHEN outcome IN ('not covered', 'unanswered', 'misread', 'truncated', 'coverage unknown') THEN 1 ELSE 0 END)
        AS not_looked
FROM current_finding
WHERE waveband LIKE '%infrared%'
GROUP BY target_name
HAVING sum(CASE WHEN outcome = 'blank' THEN 1 ELSE 0 END) > 0
    AND sum(CASE WHEN outcome IN ('counterpart', 'ambiguous', 'chance', 'hidden', 'partly covered') THEN 1 ELSE 0 END) = 0
ORDER BY target_name;
